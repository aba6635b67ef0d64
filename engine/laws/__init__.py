"""Scalar laws."""
