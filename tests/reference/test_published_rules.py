"""Rules of the default codebook against the documents they are taken from."""

from itertools import pairwise

import pytest

from foresaid.model.codebook import default_codebook

# Office of the Director of National Intelligence: Intelligence Community Directive 203,
# Analytic Standards, 2 January 2015, section D.6.e(2)(a), in percent.
ICD_203 = {
    "almost no chance": (1, 5),
    "remote": (1, 5),
    "very unlikely": (5, 20),
    "highly improbable": (5, 20),
    "unlikely": (20, 45),
    "improbable": (20, 45),
    "roughly even chance": (45, 55),
    "roughly even odds": (45, 55),
    "likely": (55, 80),
    "probable": (55, 80),
    "very likely": (80, 95),
    "highly probable": (80, 95),
    "almost certain": (95, 99),
    "nearly certain": (95, 99),
}

# M. D. Mastrandrea et al. (2010): Guidance note for lead authors of the IPCC Fifth Assessment
# Report on consistent treatment of uncertainties, Table 1 and the terms of its note, in
# percent. `more likely than not` is above 50.
AR5 = {
    "virtually certain": (99, 100),
    "extremely likely": (95, 100),
    "very likely": (90, 100),
    "likely": (66, 100),
    "more likely than not": (50, 100),
    "about as likely as not": (33, 66),
    "unlikely": (0, 33),
    "very unlikely": (0, 10),
    "extremely unlikely": (0, 5),
    "exceptionally unlikely": (0, 1),
}


@pytest.mark.parametrize(("scale", "published"), [("icd-203", ICD_203), ("ipcc-ar5", AR5)])
def test_likelihood_scales(scale, published):
    words = default_codebook().likelihood_scales[scale].words
    percent = {w: (round(100 * a, 9), round(100 * b, 9)) for w, (a, b) in words.items()}
    assert percent == published


def test_sources_are_named():
    scales = default_codebook().likelihood_scales
    assert "Directive 203" in scales["icd-203"].source
    assert "Mastrandrea et al. 2010" in scales["ipcc-ar5"].source


def test_the_first_scale_leaves_no_hole_between_its_bands():
    bands = sorted(set(ICD_203.values()))
    assert all(low[1] == high[0] for low, high in pairwise(bands))
