"""See where the independence assumption of naive Bayes breaks, whether it matters, and what to model instead."""

__version__ = "0.1.0"
