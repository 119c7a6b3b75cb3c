"""The science, pure numpy: moist air, the line's water balance, the ensemble. SI, absolute pressure."""
