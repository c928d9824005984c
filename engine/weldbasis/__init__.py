"""weldbasis: the basis of every welding decision, written down."""

__version__ = "0.1.0"
