"""Long tables: one row per sample and characteristic, brought to the one row per sample that everything else reads."""
