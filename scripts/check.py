"""Formatting, lint, types, tests: everything that a change must pass, in one command."""

from __future__ import annotations

import subprocess
import sys

COMMANDS = (
    ["-m", "ruff", "format", "--check", "."],
    ["-m", "ruff", "check", "."],
    ["-m", "mypy"],
    ["-m", "pytest", "-n", "2"],
)


def main() -> int:
    """Run every gate; all of them run even when one fails."""
    failed = [command for command in COMMANDS if subprocess.run([sys.executable, *command], check=False).returncode]
    for command in failed:
        print("failed:", " ".join(command[1:]))
    return 1 if failed else 0


if __name__ == "__main__":
    sys.exit(main())
