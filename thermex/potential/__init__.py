"""What holds it together: pair forms, lattice sums and force constants."""
