"""From weighed standards to absorptivities, linear range and inverse prediction: numbers only, no files, no JSON."""
