"""Figures: from arrays to pictures."""
