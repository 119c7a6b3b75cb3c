"""The science, pure numpy, SI: moist air, the line's water balance, the ensemble."""
