"""Products: layers and tables as files."""
