"""Label image -> numbers, whatever its origin."""
