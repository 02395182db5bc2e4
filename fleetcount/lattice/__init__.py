"""What is walked on: definition files and their checks, symmetry group, patch."""
