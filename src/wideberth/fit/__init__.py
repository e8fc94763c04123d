"""Least squares, diagnosis, and models as quadratics with covariance."""
