"""Fixtures that several rooms share."""
