"""Targets and boosters that belong together, as groups that are reviewed at once."""
