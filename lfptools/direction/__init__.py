"""The signals of pairs of areas in, estimates, controls and a verdict on who leads out."""
