"""Stacks of quadratics: terms, values, bounds over boxes, extremes on spheres."""
