"""Short sources say nothing that the full source does not."""

from __future__ import annotations

import pytest

from optics.device import catalogue
from optics.present.citation import short_source


@pytest.mark.parametrize(
    ("source", "short"),
    [
        (
            "H. U. Yang, J. D'Archangel, M. L. Sundheimer. Optical dielectric function of silver. "
            "Phys. Rev. B 91, 235137 (2015) (See Supplemental Material.)",
            "Yang et al., Phys. Rev. B 91, 235137 (2015)",
        ),
        (
            "1) I. H. Malitson. Interspecimen comparison of the refractive index of fused silica. "
            "J. Opt. Soc. Am. 55, 1205-1208 (1965) 2) C. Z. Tan. Something else. J. X 1, 2 (1998)",
            "Malitson, J. Opt. Soc. Am. 55, 1205-1208 (1965)",
        ),
        (
            "A. G. Mathewson and H. P. Myers. Absolute values of the constants of some pure "
            "metals. Phys. Scr. 4, 291-292 (1971)",
            "Mathewson et al., Phys. Scr. 4, 291-292 (1971)",
        ),
        ("own ellipsometry, sample 12", "own ellipsometry, sample 12"),
        ("", ""),
    ],
)
def test_short_source(source: str, short: str) -> None:
    assert short_source(source) == short


def test_a_title_without_end_leaves_author_and_year() -> None:
    source = (
        "P. B. Johnson and R. W. Christy. Optical constants of Ni, and Pd. Phys. Rev. B 9 (1974)"
    )
    assert short_source(source) == "Johnson et al. (1974)"


def test_long_text_is_cut_at_a_word() -> None:
    short = short_source("word " * 40)
    assert len(short) <= 72
    assert short.endswith("word ...")


@pytest.mark.parametrize("entry", [one for one in catalogue.entries() if one.source])
def test_every_bundled_source_is_short_and_made_of_its_own_words(entry: catalogue.Entry) -> None:
    short = short_source(entry.source)
    assert 8 < len(short) <= 72
    for word in short.removesuffix(" ...").replace(" et al.", "").replace(",", "").split():
        assert word in entry.source.replace(",", "")
