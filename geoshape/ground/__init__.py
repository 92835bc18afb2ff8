"""Equal-area ground: planes, the choice of a CRS, and seams of the globe."""
