"""Chemistry without spectra: formulas, isotopes, sub-formulas, unit-mass assignment, molecules."""
