"""Flows whose every statistic is a formula: the truth that diagnostics are tested against.

layout    where values lie (collocated, staggered, spectral), discrete wavenumbers, the canonical dataset of a flow
roll      field A: a roll with a jet in a shear; statistics, vorticity and its tilting, column Stokes production
cellular  field B: a three-dimensional cellular flow; single Fourier modes
lines     convergence lines at a chosen angle, moving at a known speed; their skewness, spacing and axis
simple    field C (ABC flow), field D (solid rotation, pure strain), linear shear
orbits    vortex-centre depth, overturn times, orbits

Random fields stand in `toy_fields.random_fields`, turbulence in `toy_fields.solver`.
"""
