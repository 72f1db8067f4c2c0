"""Converters for the board: counts to displacement in integers, with a proved worst-case error."""
