"""Least squares: design, elements, engine, datum, Gauss-Newton, and the Solution."""
