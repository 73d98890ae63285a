"""Parameters, noise, least squares, search, covariance and ambiguity on arrays; imports physics only."""
