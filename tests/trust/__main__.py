"""python -m tests.trust [--each N] [--seed N] [--most N] [WORKSHEET ...]: the table of verdicts on changed formulas."""

from __future__ import annotations

import argparse
import sys

from tests.trust.measure import ROOT, measure


def main() -> int:
    words = argparse.ArgumentParser(description=__doc__)
    words.add_argument("--each", type=int, default=40, help="mutants of one formula")
    words.add_argument("--seed", type=int, default=1)
    words.add_argument("--most", type=int, default=10**6, help="formulas of one worksheet")
    words.add_argument("--list", action="store_true", help="print every mutant that went wrong")
    words.add_argument("sheets", nargs="*")
    asked = words.parse_args()
    sheets = asked.sheets or sorted(p.stem for p in (ROOT / "worksheets").glob("*.toml"))
    trust = measure(sheets, asked.each, asked.seed, asked.most, lambda line: print(line, file=sys.stderr, flush=True))
    print("\n".join(trust.table()))
    wrong = [*trust.false_passes, *trust.false_refutations, *trust.broken]
    missed = [c for c in trust.cases if c.differs and c.cured is not True and c.verdict == "refuted"]
    from derive.formula.text import text

    for case in [*wrong, *trust.open, *(missed if asked.list else [])]:
        said = text(case.subject.formula)
        print(f"{case.sheet} {case.subject.name} {case.mutant.way}: {case.verdict}: {said} -> "
              f"{text(case.mutant.formula)} | {case.words}"[:400])
    return 1 if wrong else 0


if __name__ == "__main__":
    sys.exit(main())
