"""`make test`: style, types, contracts, tests, and the wheel in an empty environment; within its time.

Prints the ten slowest tests. Fails when anything fails, or when all of it took longer than the limit.
"""

import subprocess
import sys
import tempfile
import time
import venv
from pathlib import Path

LIMIT_MIN = 15
ROOT = Path(__file__).parents[1]
BIN = Path(sys.executable).parent
PIP = ["-m", "pip", "--quiet", "--disable-pip-version-check"]


def main() -> int:
    began = time.monotonic()
    steps = {
        "style": [[str(BIN / "ruff"), "check", "."], [str(BIN / "ruff"), "format", "--check", "."]],
        "types": [[str(BIN / "mypy")]],
        "import contracts": [[str(BIN / "lint-imports")]],
        "tests": [[sys.executable, "-m", "pytest", "-q", "-n", "2", "--dist", "loadgroup", "--durations=10"]],
    }
    for name, commands in steps.items():
        for command in commands:
            if not _ran(name, command, ROOT):
                return 1
    if not _wheel_works():
        return 1
    minutes = (time.monotonic() - began) / 60
    print(f"all passed in {minutes:.1f} minutes (limit {LIMIT_MIN})")
    return 0 if minutes <= LIMIT_MIN else 1


def _ran(name: str, command: list[str], folder: Path) -> bool:
    print(f"== {name}: {' '.join(Path(word).name if word.startswith('/') else word for word in command)}", flush=True)
    done = subprocess.run(command, cwd=folder, check=False).returncode == 0
    if not done:
        print(f"{name} failed")
    return done


def _wheel_works() -> bool:
    """Build the wheel, install it with the locked list in an empty environment, run the demo elsewhere."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        venv.create(folder / "empty", with_pip=True)
        python = str(folder / "empty/bin/python")
        build = [sys.executable, *PIP, "wheel", "--no-deps", "--no-build-isolation", "-w", str(folder), str(ROOT)]
        if not _ran("wheel", build, folder):
            return False
        wheel = str(next(folder.glob("leafturn-*.whl")))
        commands = [
            [python, *PIP, "install", "--require-hashes", "-r", str(ROOT / "requirements.lock")],
            [python, *PIP, "install", "--no-deps", wheel],
            [str(folder / "empty/bin/leafturn"), "demo", "--folder", str(folder / "demo"), "--json"],
        ]
        return all(_ran("wheel", command, folder) for command in commands)


if __name__ == "__main__":
    sys.exit(main())
