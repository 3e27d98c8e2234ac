"""Formulas of heat, sap, air and sun: pure functions of numpy arrays, SI in and out."""
