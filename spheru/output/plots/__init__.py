"""Figures, one a module; each draws on the axes that it is given."""
