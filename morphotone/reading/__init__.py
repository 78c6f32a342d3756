"""Bytes to reconstruction to findings; the only floor that opens input files."""
