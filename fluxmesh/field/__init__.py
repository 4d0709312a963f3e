"""Flow data laid on a surface."""
