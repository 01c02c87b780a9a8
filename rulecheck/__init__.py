"""Rules checker for analog log-domain computing circuits.

The package root imports nothing heavy; see :mod:`rulecheck.api` for what rules use.
"""

__version__ = "0.1.0"
__all__ = ["__version__"]
