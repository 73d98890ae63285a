"""Station oscillators and clocks from emitters of known motion."""
