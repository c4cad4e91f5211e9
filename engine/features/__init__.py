"""From a density to the numbers that people report: extrema, distances, integrals, layers, statistics."""
