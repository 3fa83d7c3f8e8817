"""Boron in soil and crop: figures from tables with their sources, and the formulas around them."""
