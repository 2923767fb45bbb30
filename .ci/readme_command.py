"""Print the n-th shell command of the README, so that what is checked is what a user is told."""

import re
import sys
from pathlib import Path

readme = (Path(__file__).parent.parent / "README.md").read_text(encoding="utf-8")
print(re.findall(r"^```sh\n(.*?)^```", readme, flags=re.MULTILINE | re.DOTALL)[int(sys.argv[1]) - 1])
