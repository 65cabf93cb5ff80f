"""The mathematics of test plans: power, size, risks and sample sizes. Knows no cell and no workbook."""

from importlib.metadata import version

VERSION = version("steelyard")
