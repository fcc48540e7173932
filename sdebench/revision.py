"""The revision of the repository in the working directory."""

import subprocess

PATIENCE = 5.0  # seconds


def revision() -> str | None:
    """Return the commit that is checked out, with '-dirty' if files differ from it, or None."""
    words = ["git", "describe", "--always", "--abbrev=40", "--exclude=*", "--dirty"]
    try:
        done = subprocess.run(words, capture_output=True, text=True, timeout=PATIENCE, check=False)
    except (OSError, subprocess.TimeoutExpired):
        return None
    return done.stdout.strip() or None if done.returncode == 0 else None
