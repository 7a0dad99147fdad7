"""Hypothesis without its deadline: that the machine is busy is no defect of the mathematics."""

from hypothesis import settings

settings.register_profile("no deadline", deadline=None)
settings.load_profile("no deadline")
