"""speclib: keep confirmed EI GC-MS spectra, search unknowns, carry fragment assignments over.

Importing this package loads the standard library only; heavy libraries load inside the functions that need them.
"""

__version__ = "0.1.0"

__all__ = ["__version__"]
