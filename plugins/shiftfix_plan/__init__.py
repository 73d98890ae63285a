"""Prediction and planning."""
