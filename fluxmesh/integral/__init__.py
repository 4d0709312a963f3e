"""Integrals over faces: arrays in, arrays out."""
