"""The report: one self-contained page that a planner can read, print and defend."""
