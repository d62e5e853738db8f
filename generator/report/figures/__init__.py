"""Drawings: what is known becomes SVG.  A drawing function draws and computes nothing but places."""
