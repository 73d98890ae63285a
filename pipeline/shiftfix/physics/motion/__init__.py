"""Emitter and receiver motions: state, acceleration and partial derivatives at given epochs."""
