"""The search for wires: maps of impedance, scoring over bands, ranking. Pure numerics."""
