"""Makes math.woff2, the part of STIX Two Math (SIL Open Font License 1.1) that a report uses.

Run once, by hand, when the set of characters changes; it needs fonttools and brotli and the font's own file, none
of which the package needs at run time:

    python tests/report/make_font.py STIXTwoMath-Regular.ttf

The OpenType MATH table and the larger variants of fences, roots and sums stay in; everything else goes.
"""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

_LATIN = "".join(map(chr, (*range(0x20, 0x7F), *range(0xA0, 0x180))))
_GREEK = "".join(map(chr, range(0x391, 0x3CA))) + "ϑϕϵϱϖ"
_SIGNS = (
    "‐‑–—‘’“”†‡•…′″⁄ℏℓℜℑ→←↔⇒∂∇∈∏∑−∓∕∗∘∙√∞∥∫∼≈≔≠≡≤≥≪≫⊥⋅⋆⌈⌉⌊⌋⟨⟩⟂ˆ˜¯˙̂̃̄̇⃗⋯‖¹²³⁴⁵⁶⁷⁸⁹⁰⁻"
    "𝒜ℬ𝒞𝒟ℰℱ𝒢ℋℐ𝒥𝒦ℒℳ𝒩𝒪𝒫𝒬ℛ𝒮𝒯𝒰𝒱𝒲𝒳𝒴𝒵ℎ"
)
_MATH_LETTERS = "".join(map(chr, (*range(0x1D400, 0x1D468), *range(0x1D6E2, 0x1D71C))))


def main(source: str) -> None:
    from fontTools import subset

    options = subset.Options(
        flavor="woff2", layout_features=["kern", "liga", "ssty", "flac", "mark", "mkmk"], hinting=False,
        name_IDs=[0, 1, 2, 3, 4, 5, 6, 13, 14], notdef_outline=True, recalc_timestamp=False,
    )
    font = subset.load_font(source, options)
    worker = subset.Subsetter(options)
    worker.populate(text=_LATIN + _GREEK + _SIGNS + _MATH_LETTERS)
    worker.subset(font)
    narrow_roots(font)
    subset.save_font(font, str(Path(__file__).parents[2] / "derive" / "report" / "math.woff2"), options)


def narrow_roots(font: Any) -> None:
    """Tall root signs as narrow as the small one.

    Browsers reserve the width of the widest form for every root, which leaves a gap behind the small ones.
    """
    root = font.getBestCmap()[0x221A]
    width = font["hmtx"][root][0]
    variants = font["MATH"].table.MathVariants
    forms = variants.VertGlyphConstruction[variants.VertGlyphCoverage.glyphs.index(root)]
    names = {record.VariantGlyph for record in forms.MathGlyphVariantRecord}
    names |= {part.glyph for part in forms.GlyphAssembly.PartRecords}
    for name in sorted(names - {root}):
        advance, left = font["hmtx"][name]
        glyph, scale = font["glyf"][name], width / advance
        glyph.coordinates.scale((scale, 1))
        glyph.coordinates.toInt()
        glyph.recalcBounds(font["glyf"])
        font["hmtx"][name] = (width, round(left * scale))


if __name__ == "__main__":
    main(sys.argv[1])
