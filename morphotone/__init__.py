"""Electrotonic structure of whole folders of reconstructed neurons."""
