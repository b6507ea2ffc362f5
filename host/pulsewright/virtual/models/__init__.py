"""Chip models, their limits typed by hand from data sheets, never from a definition."""
