"""Measure the shape of polygons on equal-area ground."""
