"""The contract battery: run it over a model of your own before you offer it to others.

>>> from steelyard.models import model_registry
>>> from steelyard.models.checks import EXAMPLE_COVARIATES, ExampleFlows, checks_for
>>> model = model_registry().get("poisson")(covariates=EXAMPLE_COVARIATES)
>>> for check in checks_for(model):
...     check(model, ExampleFlows(directed=True))
"""

from steelyard.models.checks.battery import Check, checks_for
from steelyard.models.checks.broken import ContractError
from steelyard.models.checks.example import EXAMPLE_COVARIATES, ExampleFlows

__all__ = ["EXAMPLE_COVARIATES", "Check", "ContractError", "ExampleFlows", "checks_for"]
