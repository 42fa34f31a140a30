"""Write docs/validation.md anew from the registry of outside checks; exit code 1 where one fails."""

import sys
from pathlib import Path

DOCS = Path(__file__).parent
sys.path.insert(0, str(DOCS.parent / "tests"))

from validation.page import compute, page, split_off  # noqa: E402 - the registry lies beside the tests
from validation.registry import OPEN_DATA  # noqa: E402

found = compute()
target = DOCS / "validation.md"
kept = "" if OPEN_DATA else split_off(target.read_text("utf-8"))[1]  # of a computer that had the measurements
target.write_text(f"{page(found)}\n{kept}" if kept else page(found), encoding="utf-8")
failed = [row.quantity for _, groups in found for _, rows in groups for row in rows if not row.passed]
print("\n".join([f"beyond what is allowed: {name}" for name in failed] or ["Wrote docs/validation.md: all within."]))
sys.exit(1 if failed else 0)
