"""Emulated parts that answer in bytes as the real ones do."""
