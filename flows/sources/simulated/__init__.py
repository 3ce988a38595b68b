"""A simulated source whose truth is known: a heart, its catheters, their faults, and the invented study Tarn."""
