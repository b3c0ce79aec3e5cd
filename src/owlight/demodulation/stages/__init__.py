"""The stages: plain functions on arrays. Figures are flat mappings whose names carry the unit."""
