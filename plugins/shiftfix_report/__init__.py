"""Products: text report, residuals, solution file."""
