"""Readers of measured spectra, chosen by content: `speclib.formats.reading.read_spectra` is the door."""
