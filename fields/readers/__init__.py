"""Readers of histories: CSV tables and published index files, told apart by content."""
