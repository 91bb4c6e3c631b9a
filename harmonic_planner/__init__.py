"""Plans frequency-multiplier chains: spur budget, a filter for every stage, and whether each filter can be built."""

__version__ = "0.2.0"
