"""Runs that have not been measured yet."""
