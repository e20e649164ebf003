"""Makes ``tests.demo`` importable also when pytest is not run as ``python -m pytest``."""

import sys
from pathlib import Path

sys.path.append(str(Path(__file__).parents[2]))
