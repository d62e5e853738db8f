"""A Campaign becomes Findings: verdicts with proofs, recipes, ranges, hulls, sentences.

In: a Campaign.  Out: frozen Findings, to and from JSON.  Used by ``book`` and ``history``.
"""
