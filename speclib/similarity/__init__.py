"""Similarity of two spectra: slow, obvious reference code on plain sorted arrays. It is the definition of every
score.
"""
