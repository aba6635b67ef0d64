"""Data that engine, io, cases and tests share."""
