"""Figures for people, drawn from results alone."""
