"""Release: publishing a finished product as a whole."""
