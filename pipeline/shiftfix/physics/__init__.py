"""Pure functions on float64 arrays in SI units; components on the last axis; imports numpy, scipy and erfa only."""
