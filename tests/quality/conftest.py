"""Let the tests of quality find what they share with the other tests, however they are started."""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))
