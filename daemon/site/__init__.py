"""The site file: read, validated as a whole, typed, and explained."""
