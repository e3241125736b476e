"""Formulas for gas and air: arrays in, arrays out."""
