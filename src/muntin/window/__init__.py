"""Probabilities, window, set point and checks on the model."""
