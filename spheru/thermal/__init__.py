"""HOW it cools: temperature over time, and the length grown by then."""
