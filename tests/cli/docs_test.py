#!/usr/bin/env python3
"""Runs the commands of a document as its reader would, one after the other.

    docs_test.py PROGRAM docs/grading.md

All fenced blocks without a language, in an empty folder that looks like the project's.
"""

import os
import re
import subprocess
import sys
import tempfile
from pathlib import Path

PROJECT = Path(__file__).resolve().parents[2]
program, document = (Path(argument).resolve() for argument in sys.argv[1:])
blocks = re.findall(r"^```\n(.*?)^```$", document.read_text(encoding="utf-8"), re.M | re.S)
if not blocks:
    sys.exit(f"{document} has no commands")

# "python3" is the one that runs this test.
path = f"{Path(sys.executable).parent}:{os.environ['PATH']}"
with tempfile.TemporaryDirectory(prefix="laygauge-docs-") as name:
    folder = Path(name)
    (folder / "build/release").mkdir(parents=True)
    (folder / "build/release/laygauge").symlink_to(program)
    for part in ("sample-images", "docs", "calibration"):
        (folder / part).symlink_to(PROJECT / part)
    for block in blocks:
        done = subprocess.run(["bash", "-e", "-o", "pipefail", "-c", block], cwd=folder, text=True,
                              stdout=subprocess.PIPE, stderr=subprocess.STDOUT, check=False,
                              env={**os.environ, "PATH": path})
        if done.returncode != 0:
            sys.exit(f"{block}\nended with {done.returncode}:\n{done.stdout}")
        print(block)
    made = sorted(str(file.relative_to(folder)) for file in folder.rglob("*.*ml"))
    print("pages:", ", ".join(made) or "none")
