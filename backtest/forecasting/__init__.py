"""Filters, tails and the grammar that joins them into forecast models."""
