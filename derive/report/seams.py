"""The seam: where the derived line and the measured one meet.  Shape and word say the verdict, colour never does."""

from __future__ import annotations

from derive.record.said import Judged
from derive.report.context import Context
from derive.report.emit_mathml import mathml
from derive.report.escape import html_text
from derive.report.prose import MEANING, mathematics, shared_digits

_DASHES = "<i></i>" * 5


def seam(judged: Judged, context: Context) -> str:
    """One seam; its words are plain text, so that they are read aloud and printed."""
    word = "".join(
        html_text(w) if isinstance(w, str) else mathml(context.layout.as_written(w, small=True), block=False)
        for w in mathematics(words(judged))
    )
    dashes = _DASHES if judged.verdict == "undecided" else ""
    right = "" if judged.verdict == "proved" else _rule("rule measure", dashes)  # proved: straight across
    left = _rule("rule", dashes)
    return f'<p class="seam {judged.verdict}">{left}<span class="word">{word}</span>{right}</p>'


def _rule(kind: str, inside: str) -> str:
    return f'<span class="{kind}" aria-hidden="true">{inside}</span>'


def words(judged: Judged) -> str:
    """The verdict's word, with what it rests on: agrees, 41 digits; refuted: too small by 4."""
    digits = shared_digits(judged)
    if judged.verdict == "agrees" and digits:
        return f"agrees, {digits} digits"
    if judged.verdict == "refuted":
        return f"refuted: {_reason(judged)}"
    if judged.verdict in ("undecided", "untested"):
        return f"{judged.verdict}: {_evidence(judged) or MEANING[judged.verdict]}"
    return judged.verdict


def _reason(judged: Judged) -> str:
    said = (judged.diagnosis or _evidence(judged) or "not equal").strip()
    return said.rstrip(".")[:1].lower() + said.rstrip(".")[1:] if not said[:2].isupper() else said.rstrip(".")


def _evidence(judged: Judged) -> str:
    return next((f.evidence for f in judged.findings if f.evidence and f.verdict == judged.verdict), "")
