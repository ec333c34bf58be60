"""What an inverted model is worth: coverage, restoration, resolution and errors."""
