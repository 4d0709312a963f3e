"""The case file: what may be asked, and how it is read."""
