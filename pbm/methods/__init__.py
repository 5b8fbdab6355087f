"""Arithmetic: numbers and arrays in, numbers and arrays out. No clock, file, record or log."""
