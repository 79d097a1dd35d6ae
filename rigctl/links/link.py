"""One link to one address."""
