"""Numbers on the grid, no physics: grid, transforms, recombined bases, banded operators and solves."""
