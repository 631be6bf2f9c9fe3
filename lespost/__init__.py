"""lespost: regimes, profiles and virtual instruments from large-eddy simulations of the ocean surface boundary layer.

Nothing heavy is imported here: each subpackage is imported by the path that needs it.
"""

__version__ = "0.1.0"
