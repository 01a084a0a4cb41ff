"""Result -> files and figures."""
