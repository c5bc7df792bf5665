"""Where the installed command and the examples are."""

from __future__ import annotations

import shutil
import sysconfig
from pathlib import Path

EXAMPLES = Path(__file__).parents[2] / "example_measures"
COMMAND = shutil.which("relorbit", path=sysconfig.get_path("scripts"))
