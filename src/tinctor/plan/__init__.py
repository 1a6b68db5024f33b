"""Before measuring: overlap, wavelengths, dilution. Numbers only."""
