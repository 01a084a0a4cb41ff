"""TOML -> settings and material records, with every fault of a file at once."""
