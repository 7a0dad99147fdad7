"""Average run lengths: how many subgroups until a detector signals, in control or after a shift.

All are zero state (from the detector's start), in subgroups, for independent normal values; shifts
and widths are in standard errors of the charted statistic. One too long for a float is inf.
"""
