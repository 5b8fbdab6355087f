"""The survey as one HTML page: it sorts, formats and draws what the record holds, and computes nothing else."""

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from pathlib import Path

from jinja2 import Template
from markupsafe import Markup

from pbm.io.atomic import replace_file
from pbm.io.report import survey_figures
from pbm.io.report import words as report_words
from pbm.io.report.look import drawing
from pbm.io.report.page import environment
from pbm.io.report.svg import Album
from pbm.records.survey import StreamSurvey, Survey, Truncation

_HERE = Path(__file__).parent
_ORDER = ("useful", "marginal", "not useful here")
_SCALES = {"none": "as reported", "log": "logarithm", "boxcox": "Box-Cox"}


@dataclass(frozen=True, slots=True)
class Section:
    """A stream with its plots, and where on the page it stands."""

    anchor: str
    stream: StreamSurvey
    volume: Markup
    distribution: Markup
    medians: Markup | None
    autocorrelation: Markup | None


def write_survey_report(path: Path, survey: Survey) -> None:
    """Write the report; the same survey gives the same bytes.

    Parameters
    ----------
    path
        The HTML file; its folder must exist.
    survey
        What was found.
    """
    replace_file(path, survey_report(survey).encode("utf-8"))


def survey_report(survey: Survey) -> str:
    """The report as HTML text: no script, nothing loaded from elsewhere."""
    album = Album()
    with drawing():
        sections = list(_sections(album, survey))
    return _template().render(
        survey=survey,
        style=Markup((_HERE / "style.css").read_text(encoding="utf-8")),
        survey_style=Markup((_HERE / "survey.css").read_text(encoding="utf-8")),
        plot_style=album.styles(),
        in_short=in_short(survey),
        rows=sorted(sections, key=lambda section: (_ORDER.index(section.stream.verdict), section.stream.stream)),
        sections=sections,
    )


def in_short(survey: Survey) -> list[str]:
    """The answer in a few sentences."""
    verdicts = [stream.verdict for stream in survey.streams]
    counted = "; ".join(f"{verdicts.count(one)} {one}" for one in _ORDER if one in verdicts)
    told = [f"{len(verdicts)} stream{'' if len(verdicts) == 1 else 's'}: {counted}."]
    grave = [(stream.stream, [odd.short for odd in stream.oddities if odd.grave]) for stream in survey.streams]
    odd = [f"{name} ({', '.join(found)})" for name, found in grave if found]
    if odd:
        told.append(f"To be cleared up before a monitor is chosen: {', '.join(odd)}.")
    return told


def _sections(album: Album, survey: Survey) -> Iterator[Section]:
    for place, stream in enumerate(survey.streams, 1):
        unit = report_words.in_a_plot(stream.unit)
        chosen = None if stream.suggested is None else stream.truncations[stream.suggested]
        yield Section(
            f"stream-{place}",
            stream,
            survey_figures.volume_plot(stream.volume),
            survey_figures.distribution_plot(
                album, stream.distribution, (chosen.low, chosen.high) if chosen else (None, None), unit
            ),
            survey_figures.medians_plot(album, stream, unit),
            survey_figures.autocorrelation_plot(album, stream.dependence) if stream.dependence else None,
        )


def limits_in_words(truncation: Truncation) -> str:
    """Truncation limits, such as "125 to 155"."""
    if truncation.low is None and truncation.high is None:
        return "all results"
    low = "" if truncation.low is None else f"{truncation.low:g}"
    high = "" if truncation.high is None else f"{truncation.high:g}"
    outside = "set to the limit" if truncation.mode == "winsorize" else "left out"
    return f"{low} to {high}, outside {outside}"


def scale_in_words(truncation: Truncation) -> str:
    """A transform, such as "Box-Cox, exponent -0.4"."""
    power = truncation.transform_lambda
    return _SCALES[truncation.transform] + ("" if power is None else f", exponent {power:g}")


@cache
def _template() -> Template:
    made = environment()
    made.globals.update({"limits_in_words": limits_in_words, "scale_in_words": scale_in_words})
    return made.get_template("survey.html")
