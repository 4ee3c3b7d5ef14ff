"""What the user wrote: YAML files to frozen typed objects in canonical units, each problem with file and line."""

from trainopt.files.catalog import Catalog, Holder, Module
from trainopt.files.change import Field, field_dimension, find_field, set_field
from trainopt.files.check import Checked, check, examine
from trainopt.files.load import find_root, load_case, load_medium, load_workspace
from trainopt.files.medium import CurveSpec, Flush, Limits, LotSpec, Medium, Origin, Run, Tested, Variability
from trainopt.files.scenario import (
    Batch,
    BlockSpec,
    Costs,
    FeedVariability,
    Fix,
    Installed,
    MediumChoice,
    Product,
    Pump,
    ReliabilityBasis,
    Scenario,
    StageSpec,
)
from trainopt.files.source import Source, file_hash, shown_path
from trainopt.files.workspace import Case, Workspace

__all__ = [
    "Batch",
    "BlockSpec",
    "Case",
    "Catalog",
    "Checked",
    "Costs",
    "CurveSpec",
    "FeedVariability",
    "Field",
    "Fix",
    "Flush",
    "Holder",
    "Installed",
    "Limits",
    "LotSpec",
    "Medium",
    "MediumChoice",
    "Module",
    "Origin",
    "Product",
    "Pump",
    "ReliabilityBasis",
    "Run",
    "Scenario",
    "Source",
    "StageSpec",
    "Tested",
    "Variability",
    "Workspace",
    "check",
    "examine",
    "field_dimension",
    "file_hash",
    "find_field",
    "find_root",
    "load_case",
    "load_medium",
    "load_workspace",
    "set_field",
    "shown_path",
]
