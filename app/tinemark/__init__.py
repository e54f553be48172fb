"""Tinemark: where a periodically operated system stops repeating, as proved numbers."""

__version__ = "0.1.0"
