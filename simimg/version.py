"""The version of simimg, for every product's CREATOR."""

__version__ = "0.1.0"
