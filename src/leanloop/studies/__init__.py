"""Studies: many cases of one flowsheet, kept as they are solved, and what they tell."""
