"""A prediction against measured values: deviations, budget, sensitivity, trust."""
