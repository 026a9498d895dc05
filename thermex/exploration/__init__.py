"""Many predictions: sweeps, matching a measured value, fitting parameters."""
