"""Makes the plain twins and the small worlds in support/ importable by the tests beside them."""

import sys
from pathlib import Path

sys.path.append(str(Path(__file__).parent / "support"))
