"""The door: one file per command; parse, call, print. Nothing is computed here."""
