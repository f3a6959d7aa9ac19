"""Exact questions about expressions; knows no mechanics.

``graph`` compiles, ``modular`` and ``jets`` evaluate modulo a prime, ``balls``
in ball arithmetic, ``identity`` answers whether something vanishes.
"""
