"""Corrections of a shot's curves: each computed and reported always, applied where it is switched on and holds.

The one page of what happens, and in which order, is :mod:`shpb.response.corrections.chain`.
"""
