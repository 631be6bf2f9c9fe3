"""Profiles: the one pass over the bytes, windows, layer depths, production terms."""
