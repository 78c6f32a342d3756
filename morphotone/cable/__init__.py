"""Reconstruction and assumptions to electrotonus; pure arrays, no disk, no tables."""
