"""The kinds of plans; importing this package registers them all."""

from importlib import import_module

MODULES = (
    "binomial",
    "poisson",
    "hypergeometric",
    "normal",
    "student",
    "spread",
    "variables",
    "life",
    "inspected",
    "clustered",
    "until",
    "three_class",
    "staged",
    "sequential",
    "inspected_stages",
    "two_binomial",
    "two_poisson",
    "two_means",
    "two_spreads",
)

for _module in MODULES:
    import_module(f"{__name__}.{_module}")
