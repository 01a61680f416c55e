"""Pure numerics: what a straight wire does at radio frequency, in SI units."""
