"""Solids and the distances between them over the motion. Plain arrays in and out."""
