"""Files in: columns, units, missing and doubtful values. The schema imports without pandas; the readers need it."""
