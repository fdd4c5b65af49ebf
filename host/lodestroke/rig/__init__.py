"""The rig: what is wired on one bench, read from TOML, and the limits that its board gets."""

from .limits_blob import limits_blob, limits_values
from .load import load_rig
from .models import Rig

__all__ = ["Rig", "limits_blob", "limits_values", "load_rig"]
