"""Check that a wheel holds the three packages, whole, and nothing else.

Usage: python .ci/check_wheel.py WHEEL (in the checkout, whose committed files are the measure).
"""

import subprocess
import sys
import zipfile

PACKAGES = ("metro", "firmware_bridge", "calibration")


def committed() -> set[str]:
    """Return the committed files of the packages."""
    command = ["git", "ls-files", "--", *PACKAGES]
    listed = subprocess.run(command, check=True, capture_output=True, text=True)  # noqa: S603  # fixed words
    return set(listed.stdout.splitlines())


def main(wheel: str) -> int:
    """Print what differs and return the exit code."""
    with zipfile.ZipFile(wheel) as archive:
        names = {name for name in archive.namelist() if not name.endswith("/")}
    held = {name for name in names if ".dist-info/" not in name}
    expected = committed() | {f"{package}/py.typed" for package in PACKAGES}
    faults = [f"missing in the wheel: {name}" for name in sorted(expected - held)]
    faults += [f"not to be in the wheel: {name}" for name in sorted(held - expected)]
    sys.stdout.write("\n".join(faults) or f"{len(held)} files, all of the three packages")
    sys.stdout.write("\n")
    return int(bool(faults))


if __name__ == "__main__":
    sys.exit(main(sys.argv[1]))
