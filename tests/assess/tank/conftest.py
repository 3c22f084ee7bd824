"""Makes the helpers of this folder and the one above importable by its tests."""

import sys
from pathlib import Path

for folder in (Path(__file__).parent, Path(__file__).parents[1]):
    sys.path.insert(0, str(folder))
