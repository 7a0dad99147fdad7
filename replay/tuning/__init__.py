"""Judging settings on a recording: calibrated on its first part, proved on the rest."""
