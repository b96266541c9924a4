"""Mechanisms, their motion and what can be read from it. Knows no plugin, no file format, no pixel."""
