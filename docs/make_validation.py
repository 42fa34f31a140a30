"""Write docs/validation.md anew from the registry of outside checks; exit code 1 where one fails."""

import sys
from pathlib import Path

DOCS = Path(__file__).parent
sys.path.insert(0, str(DOCS.parent / "tests"))

from validation.page import compute, page  # noqa: E402 - the registry lies beside the tests

found = compute()
(DOCS / "validation.md").write_text(page(found), encoding="utf-8")
failed = [row.quantity for _, groups in found for _, rows in groups for row in rows if not row.passed]
print("\n".join([f"beyond what is allowed: {name}" for name in failed] or ["Wrote docs/validation.md: all within."]))
sys.exit(1 if failed else 0)
