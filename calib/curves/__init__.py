"""Standards, noise, solver, fit: from readings to a frozen curve."""
