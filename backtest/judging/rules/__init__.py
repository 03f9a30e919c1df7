"""Dated rules as data: one profile a file, each number with its text, date and paragraph."""
