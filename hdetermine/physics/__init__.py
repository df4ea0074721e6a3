"""Constants, laws and tables of the trade."""
