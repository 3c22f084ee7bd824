"""Pages that stand alone: one file, no network, readable on a phone and printed well."""
