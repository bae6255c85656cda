"""Analytic elements: what each one is, its kernels, and the flow field that superposes them."""
