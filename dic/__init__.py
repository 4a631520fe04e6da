"""Measure a tension test from camera frames and the machine's load record.

>>> import dic
>>> result = dic.measure("test.toml")  # doctest: +SKIP
>>> print(result)  # doctest: +SKIP
>>> result.properties["youngs_modulus"].value  # doctest: +SKIP
>>> result.to_pandas(), result.to_xarray()  # doctest: +SKIP

Heavy modules load at first use.
"""

import lazy_loader

__getattr__, __dir__, __all__ = lazy_loader.attach(
    __name__,
    submodules=[
        "correlation",
        "frames",
        "pattern",
        "properties",
        "quantities",
        "report",
        "store",
        "strain",
        "sync",
        "uncertainty",
    ],
    submod_attrs={
        "errors": ["InputError", "Notice", "TautenError"],
        "measurement": ["Measurement", "Scene"],
        "pipeline": ["measure"],
        "testfile": ["TestFile", "load"],
    },
)
