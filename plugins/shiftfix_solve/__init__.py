"""Search, fix and weigh: from frequencies to position, velocity and rest frequency."""
