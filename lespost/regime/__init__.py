"""Which turbulence regime: anisotropy, frames, the classifier, its independent witnesses, the regime plane."""
