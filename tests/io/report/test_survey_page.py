"""The survey's page: well formed, self-contained, the same bytes, with every stream, its verdict, reason and oddities."""

import re

import numpy as np
import pytest

from pbm.io.report.survey_page import survey_report
from pbm.records.survey import Survey
from tests.io.report.parsed import Page, plain
from tests.stages.test_survey import sodium, surveyed


@pytest.fixture(scope="module")
def survey() -> Survey:
    odd = np.round(np.random.default_rng(1).lognormal(0.6, 0.3, 6000), 1)
    odd[3000:] *= 10
    streams = (
        surveyed(sodium(9000)),
        surveyed(odd, analyte="tsh").model_copy(update={"unit": "<b>µU & co</b>\x07", "stream": "tsh@<script>"}),
        surveyed(sodium(10), days=1),
        surveyed(np.full(3000, 140.0)),
        surveyed(np.array([140.0])),
    )
    return Survey(made_by="pbm 0", laboratory="Tern Bay", seed=1, history_sha256="h", lab_sha256="l", streams=streams)


@pytest.fixture(scope="module")
def page(survey: Survey) -> Page:
    return Page(survey_report(survey))


def test_it_is_well_formed_and_no_identifier_stands_twice(page: Page):
    assert page.wrong == []
    identifiers = [one.attributes["id"] for one in page.elements if "id" in one.attributes]
    assert len(set(identifiers)) == len(identifiers)


def test_nothing_is_loaded_and_nothing_runs(survey: Survey, page: Page):
    assert not page.of("script") and not page.of("link") and not page.of("img")
    text = survey_report(survey)
    assert not re.search(r"https?://|@import|url\(", text)
    assert "\x07" not in text


def test_every_stream_has_its_section_with_verdict_reason_and_oddities(survey: Survey, page: Page):
    for place, stream in enumerate(survey.streams, 1):
        told = plain(page.identified(f"stream-{place}"))
        assert stream.verdict in told
        assert stream.reason.replace("\x07", "\ufffd")[1:] in told
        for odd in stream.oddities:
            assert " ".join(odd.words.replace("\x07", "\ufffd").split()) in told


def test_every_link_leads_to_a_place_on_the_page(page: Page):
    places = {one.attributes.get("id") for one in page.elements}
    assert {one.attributes["href"].removeprefix("#") for one in page.of("a")} <= places


def test_every_plot_tells_what_it_shows(page: Page):
    plots = page.of("svg")
    assert len(plots) >= 3 * 3 + 2
    assert all(len(one.attributes["aria-label"]) > 40 for one in plots)


def test_the_same_survey_gives_the_same_bytes(survey: Survey):
    one = survey.model_copy(update={"streams": survey.streams[:1]})
    assert survey_report(one) == survey_report(one)


def test_a_survey_of_no_stream_is_a_page(survey: Survey):
    assert Page(survey_report(survey.model_copy(update={"streams": ()}))).wrong == []
