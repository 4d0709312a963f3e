"""What the user sees: terminal tables, result file, pictures."""
