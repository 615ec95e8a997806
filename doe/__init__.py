"""Inverse design of diffractive optical elements, from one config to masks a foundry can make."""

__version__ = "0.1.0"
