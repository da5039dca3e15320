"""Shape of the correlation hole of anisotropic fractional quantum Hall liquids by Monte Carlo."""

__version__ = "0.1.0"
