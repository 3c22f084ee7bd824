"""Makes the helpers of this folder and the ones above importable by its tests."""

import sys
from pathlib import Path

for folder in (Path(__file__).parent, Path(__file__).parents[1], Path(__file__).parents[2] / "published"):
    sys.path.insert(0, str(folder))
