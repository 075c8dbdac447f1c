"""Assignments: made by hand, and carried from confirmed relatives to an unknown."""
