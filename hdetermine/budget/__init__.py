"""The uncertainty budget."""
