"""The invented county: its shapes, its truth, its soundings and its tables."""
