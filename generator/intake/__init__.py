"""A folder becomes a Campaign.

In: the bytes of a campaign's files.  Out: one frozen Campaign with every problem found.
Used by ``book`` (to build), ``history`` (to replay archived inputs) and ``cli`` (to check).
"""
