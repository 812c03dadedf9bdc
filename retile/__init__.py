"""retile: source-to-source loop tiling for C."""

__version__ = "0.1.0"
