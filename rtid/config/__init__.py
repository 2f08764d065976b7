"""YAML into settings: every error is one line with file, line and key, what is wrong and what was expected."""

from rtid.config.node import load

__all__ = ["load"]
