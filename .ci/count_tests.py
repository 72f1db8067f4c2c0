"""Add up JUnit reports; fail where a test was skipped for anything but missing real recordings.

Usage: python .ci/count_tests.py REPORT.xml ...
"""

import sys
from xml.etree import ElementTree as ET

ALLOWED = "real data: "  # how tests/real_data.py begins the reason


def main(reports: list[str]) -> int:
    """Print the counts, the last line in the form "N passed, N failed, N skipped"."""
    cases = [case for report in reports for case in ET.parse(report).iter("testcase")]  # noqa: S314  # our own files
    failed = [
        case for case in cases if any(case.find(tag) is not None for tag in ("failure", "error"))
    ]
    skipped = {
        _name(case): skip.get("message", "") for case in cases for skip in case.iter("skipped")
    }
    wrong = [f"skipped: {name}: {why}" for name, why in skipped.items() if ALLOWED not in why]
    passed = len(cases) - len(failed) - sum(case.find("skipped") is not None for case in cases)
    lines = [
        *wrong,
        f"{len(skipped)} tests skipped, {len(skipped) - len(wrong)} of them for want of real recordings",
        f"{passed} passed, {len(failed)} failed, {len(cases) - passed - len(failed)} skipped",
    ]
    sys.stdout.write("\n".join(lines) + "\n")
    return int(bool(wrong or failed or not passed))


def _name(case: ET.Element) -> str:
    return f"{case.get('classname')}::{case.get('name')}"


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
