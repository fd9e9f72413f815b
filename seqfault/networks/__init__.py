"""Elements to the three sequence networks and their factors. Everything here is per unit.

Nodes are the buses and, in zero sequence, behind them the star points with an impedance to earth.
Positive and negative sequence are held in the frame of each bus, so all matrices are symmetric.
"""
