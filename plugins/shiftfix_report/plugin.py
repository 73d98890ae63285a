"""Entry point `report`."""
