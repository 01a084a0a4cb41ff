"""THE product: label images on a grid, and their files. Knows no physics."""
