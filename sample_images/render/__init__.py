"""Render photographs of invented ruled tablets, with records traced by a simulated hand and the truth.

The tablet is a height field: millimetres, x to the right, y down, z towards the lens, z = 0 in the plane of
the inscribed face (its mean). From it come the picture, the traces of the hand, and the truth.
"""
