"""One chaos indicator a file."""
