"""Checks of data: findings in words, with severity and the source of the rule."""
