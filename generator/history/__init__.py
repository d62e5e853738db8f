"""Findings become revisions: kept whole, chained by digest, compared with one another.

In: input bytes and Findings.  Out: Revisions and Changes.  Used by ``book``, ``report`` and ``cli``.
"""
