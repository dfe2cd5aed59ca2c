"""Run Snakemake once for each list of arguments in the JSON on standard input.

Importing Snakemake takes longer than refusing a sample sheet, so that one process serves all.
After the messages of each call stand a NUL, its exit code and another NUL.
"""

import json
import os
import sys

from snakemake.cli import main

os.dup2(1, 2)
for arguments in json.load(sys.stdin):
    code = 0
    try:
        main(arguments)
    except SystemExit as end:
        code = int(end.code or 0)
    sys.stdout.flush()
    sys.stderr.flush()
    os.write(1, f"\0{code}\0".encode())
