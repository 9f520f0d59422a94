"""Slices: for fixed values of all other inputs, the exact set of one input on which an event holds.

Every numeric route stands on this: one input has no others, a region integral integrates over one other,
sampling draws the others.
"""
