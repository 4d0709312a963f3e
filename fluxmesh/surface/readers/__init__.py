"""Readers: one a family of formats, plain arrays out."""
