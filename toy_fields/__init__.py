"""Fields whose truth is known: closed-form flows, random fields, and a small wave-averaged solver.

closed_form*   flows whose statistics are formulas, on collocated and staggered grids
random_fields  random solenoidal fields with prescribed variances, spectra, spacing, axis and memory
solver/        a small Craik-Leibovich large-eddy solver: a source of realistic fields, not a research code
cases          the three shipped runs (langmuir, shear, convective)
store          bit-rounded zarr stores and their checksums
record         an invented field record sampled from an independent realisation
cli            `python -m toy_fields --help`
"""
