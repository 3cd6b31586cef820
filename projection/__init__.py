"""Projection: curves, the compiled loops, and the questions that they answer."""
