"""Discrete-dipole predictions for plasmonic nanoparticles."""
