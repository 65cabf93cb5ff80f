"""Cell functions for defects that come in clusters."""

from __future__ import annotations

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.words import Plans, Rates
from steelyard.addin.words_forms import Cluster, Correlation
from steelyard.core.forms import with_fields
from steelyard.core.questions import power
from steelyard.core.text import write_plan


@cell(
    group="ask",
    help="Power of the plan where defects come in clusters of things made together, more alike than others.",
    example="=SY_CLUSTERED(A2,5%,0.05,10)",
)
def SY_CLUSTERED(plan: Plans, rate: Rates, correlation: Correlation, cluster: Cluster) -> Cells:
    """Return the chance that the plan rejects its claim where defects come in clusters."""
    return power(with_fields(plan, "cluster", cluster=cluster, correlation=correlation), rate)


@cell(
    group="make",
    help="The same plan where defects come in clusters: every question answers for them.",
    example="=SY_IN_CLUSTERS(A2,0.05,10)",
)
def SY_IN_CLUSTERS(plan: Plans, correlation: Correlation, cluster: Cluster) -> Cells:
    """Return the text of the plan with clusters; its counts stay as they are."""
    return write_plan(with_fields(plan, "cluster", cluster=cluster, correlation=correlation))
