"""Samples to frequency: numerics of tone, ridge and burst estimation."""
