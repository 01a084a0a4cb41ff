"""Closed forms and mean field, no random number: the witness beside every simulation."""
