"""Planning: what a planner decides from: regions and ranks."""
