"""Inputs that chance spoils, and what must hold of each."""
