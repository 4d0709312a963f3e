"""Kinds of doubt, one a file: each a function from the evidence to its doubts."""
