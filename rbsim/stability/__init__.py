"""Onset of convection, growth of disturbances, steady rolls, their branches and their stability."""
