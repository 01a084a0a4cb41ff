"""Births -> label image: growth until impingement."""
