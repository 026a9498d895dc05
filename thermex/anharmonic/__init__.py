"""Beyond the quasi-harmonic approximation: the rule, the leading order, sampling."""
