"""Analytic limits, one theory a file, evaluated on elements without integrating."""
