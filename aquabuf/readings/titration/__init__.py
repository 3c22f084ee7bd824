"""Titrations in: points in long form, the samples they belong to, and the reason for each one that cannot be used."""
