"""Figures: the only room that knows matplotlib."""
