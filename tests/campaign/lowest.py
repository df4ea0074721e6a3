"""Print the lower bounds of the dependencies as constraints for pip.

    python tests/campaign/lowest.py pyproject.toml > lowest.txt
    pip install -e '.[test]' -c lowest.txt

Only what the program itself needs is held down; the tools of the tests may be newer.
"""

from __future__ import annotations

import re
import sys
import tomllib
from pathlib import Path


def lowest(project: str) -> list[str]:
    """One ``name==version`` for every ``name>=version`` of the project file."""
    constraints = []
    for requirement in tomllib.loads(project)["project"]["dependencies"]:
        stated = re.fullmatch(r"([A-Za-z0-9._-]+)>=([0-9][0-9A-Za-z.]*)", requirement)
        if stated is None:
            raise SystemExit(f"{requirement}: a lower bound of the form name>=version is needed")
        constraints.append(f"{stated[1]}=={stated[2]}")
    return constraints


if __name__ == "__main__":
    print("\n".join(lowest(Path(sys.argv[1]).read_text("utf-8"))))
