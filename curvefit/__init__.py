"""curvefit: printed pump performance charts turned into numbers with a known error."""

__version__ = "0.1.0"
__all__ = ["__version__"]
