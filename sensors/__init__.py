"""Sensors: what a reading is, one module per part, buses, emulated parts, the driver registry."""
