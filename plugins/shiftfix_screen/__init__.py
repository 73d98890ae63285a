"""Quality control of frequency tables."""
