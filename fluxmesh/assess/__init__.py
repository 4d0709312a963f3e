"""What the numbers are worth: verdict and review."""
