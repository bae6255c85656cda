"""Strengths: boundary conditions, the fit to levels with its error model, responses."""
