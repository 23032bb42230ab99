"""tbkit: proof that a quadrature decoder counts right."""

__version__ = "0.1.0"
