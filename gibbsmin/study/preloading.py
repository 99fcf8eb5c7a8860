"""What a process of a study imports before its first chunk is done: for the server that such processes fork from."""

import cantera  # noqa: F401
import xarray as xr

import gibbsmin.comparison
import gibbsmin.study.engines  # noqa: F401

# xarray looks for other array libraries, and imports those it finds, when it first makes an array and an index
xr.Dataset({"value": ("point", [0.0])}, {"point": ["first"]})
