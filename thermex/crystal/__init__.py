"""What sits where: structure types, structure files and their symmetry."""
