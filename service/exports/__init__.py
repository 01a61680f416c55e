"""Stored results in the forms that other programs and people take away. Nothing is computed."""
