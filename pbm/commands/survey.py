"""`pbm survey [STREAM...]`: what each stream's results look like and whether a monitor may pay; writes reports/survey.json and .html."""

from pathlib import Path
from textwrap import fill
from typing import TYPE_CHECKING

import typer

from pbm.commands.folder import JsonOption, LabFolder, LabOption, SeedOption, WorkersOption
from pbm.commands.tune import StreamsArgument

if TYPE_CHECKING:
    from pbm.methods.jit import Integers
    from pbm.records.laboratory import Lab
    from pbm.records.stream import StreamHistory, StreamName
    from pbm.records.survey import StreamSurvey, Survey

_WIDTH = 120


def survey(
    streams: StreamsArgument = None,
    lab: LabOption = None,
    workers: WorkersOption = None,
    seed: SeedOption = 1,
    json: JsonOption = False,
) -> None:
    """Look at each stream's history before a monitor is chosen: volume, distribution, pattern, oddities, and whether one is likely to pay.

    The verdict is a first judgement by closed form; `pbm tune` checks it by simulation. Writes reports/survey.json and survey.html.

    Example:  pbm survey
    """
    from pbm.commands.lab import read_checked_lab
    from pbm.commands.work import chosen_streams, over_streams, report_failures
    from pbm.io.report.survey_page import write_survey_report
    from pbm.io.survey_file import write_survey

    folder = LabFolder.find(lab)
    laboratory = read_checked_lab(folder.lab)
    names = chosen_streams(folder.history, streams)
    done = over_streams(folder.history, names, _Task(folder.history, laboratory, seed), workers, "Surveying")
    found = _survey(folder, laboratory, seed, [d.result for d in done if d.result is not None])
    if found.streams:
        folder.reports.mkdir(exist_ok=True)
        write_survey(folder.reports / "survey.json", found)
        write_survey_report(folder.reports / "survey.html", found)
    typer.echo(found.model_dump_json(indent=2) if json else _told(found, folder.reports))
    report_failures(done)


class _Task:
    """Survey one stream; picklable."""

    def __init__(self, folder: Path, lab: "Lab", seed: int) -> None:
        self.folder, self.lab, self.seed = folder, lab, seed

    def __call__(self, history: "StreamHistory") -> "StreamSurvey":
        from pbm.stages.survey import survey_stream

        patient, _ = _encoded(self.folder, history.name, "patient")
        lot, lots = _encoded(self.folder, history.name, "lot")
        return survey_stream(history, patient, self.lab, self.seed, lot, lots)


def _encoded(folder: Path, name: "StreamName", column: str) -> "tuple[Integers, list[str]]":
    """A number for each result of a stream, -1 where the column is empty, and the texts that the numbers stand for."""
    import numpy as np

    from pbm.io.history import read_results

    encoded = read_results(folder, name, [column])[column].combine_chunks().dictionary_encode()
    codes: Integers = encoded.indices.to_numpy(zero_copy_only=False).astype(np.int64)
    texts: list[str] = encoded.dictionary.to_pylist()
    unknown = [place for place, text in enumerate(texts) if not text]
    return np.where(np.isin(codes, unknown), -1, codes), texts


def _survey(folder: LabFolder, lab: "Lab", seed: int, streams: "list[StreamSurvey]") -> "Survey":
    from pbm import __version__
    from pbm.io.history import history_mark
    from pbm.io.lab_file import lab_fingerprint
    from pbm.records.survey import Survey

    return Survey(
        made_by=f"pbm {__version__}",
        laboratory=lab.laboratory.name,
        seed=seed,
        history_sha256=history_mark(folder.history).sha256,
        lab_sha256=lab_fingerprint(folder.lab),
        streams=tuple(streams),
    )


_HEAD = ("stream", "verdict", "a day", "results for 1 TEa", "sigma", "SD ratio", "inflation", "look at")
_EXPLAINED = (
    "A first judgement by closed form, which `pbm tune` checks by simulation. Results for 1 TEa: what the best statistic needs at the "
    "alarm budget. Sigma: TEa over analytic SD, bias taken as 0. SD ratio: patients over method. Inflation: variance of means of 50 "
    "results over what independence would give, and with ward and hour taken away."
)


def _told(found: "Survey", reports: Path) -> str:
    from pbm.commands.tables import table

    why = [_wrapped(f"{s.stream}: {s.verdict}: {s.reason}") for s in found.streams if s.verdict != "useful"]
    odd = [_wrapped(f"{s.stream}: {odd.words}") for s in found.streams for odd in s.oddities if odd.grave]
    parts = [table(_HEAD, [_row(s) for s in found.streams]), "\n".join(why), "\n".join(odd), _wrapped(_EXPLAINED)]
    return "\n\n".join([*filter(None, parts), f"Report: {reports / 'survey.html'}"])


def _wrapped(text: str) -> str:
    return fill(text, _WIDTH, subsequent_indent="  ", break_on_hyphens=False)


def _row(stream: "StreamSurvey") -> list[str]:
    needed, dependence, performance = stream.needed, stream.dependence, stream.performance
    inflation = f"{dependence.inflation:.2g} -> {dependence.inflation_without_mix:.2g}" if dependence else "-"
    return [
        stream.stream,
        stream.verdict,
        f"{stream.volume.per_day:.3g}",
        f"{needed.one:.0f}" if needed else "-",
        _number(performance.sigma),
        _number(performance.patient_to_analytic),
        inflation,
        ", ".join(odd.short for odd in stream.oddities),
    ]


def _number(value: float | None) -> str:
    return "-" if value is None else f"{value:.1f}"
