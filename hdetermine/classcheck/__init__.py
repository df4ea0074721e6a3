"""Checking a class of students."""
