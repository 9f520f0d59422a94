"""Dependence between inputs: copulas, their strengths, correlation matrices, multinormal probabilities.

The mathematics only. What a model states (`reading.model.Dependence`) is turned into it by later stops.
"""
