"""Secret sharing for people who keep recovery keys."""

__version__ = "0.1.0"
