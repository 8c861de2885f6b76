"""From responses of unknowns to concentrations with their uncertainty."""
