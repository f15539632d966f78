"""All benchmarks, one after the other: ``python benchmarks [--json FILE] [--long]``. Each can be run alone too."""

from __future__ import annotations

import argparse
import json
import subprocess
import sys
import tempfile
from pathlib import Path

SCRIPTS = ("yardstick", "scale", "stages")


def main() -> None:
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--json", type=Path, help="write all figures to this file")
    parser.add_argument("--long", action="store_true", help="also the memory of an hour's take")
    choices = parser.parse_args()
    figures = {}
    for name in SCRIPTS:
        print(f"\n== {name}", flush=True)
        with tempfile.TemporaryDirectory() as folder:
            out = Path(folder) / "figures.json"
            more = ["--long"] if choices.long and name == "scale" else []
            script = Path(__file__).with_name(f"{name}.py")
            subprocess.run([sys.executable, str(script), "--json", str(out), *more], check=True)
            if out.exists():
                figures[name] = json.loads(out.read_text(encoding="utf-8"))
    if choices.json:
        choices.json.write_text(json.dumps(figures, indent=1) + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
