"""Hullbook: campaign folders of assays and orders become certified, published answers on blending."""

__version__ = "0.1.0"
