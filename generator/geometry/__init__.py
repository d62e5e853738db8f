"""Points, shares, rows and cones: exact where it decides, fast where it searches.

In: exact numbers.  Out: small frozen records with proofs.  It knows no lot, order, file or unit, and
imports nothing else of the project; ``findings`` asks it, ``report`` may ask it for projections.
"""
