"""Why a stream's monitors are what they are: what was tried, the surface of scores, the runners-up and what they would have cost."""

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from pbm.methods.candidates import Candidate, More
from pbm.methods.chain import Preparation
from pbm.methods.in_control import slope
from pbm.methods.search import difference_from
from pbm.methods.significant import significant
from pbm.methods.statistics import STATISTICS
from pbm.records.tuning import RunnerUp, Search, StreamTuning, Surface, Truncation
from pbm.stages.monitor_search import Found
from pbm.stages.proving_ground import ProvingGround
from pbm.stages.to_plan import admit_in_plan
from pbm.stages.words import SCALES, admitted_in_words, parameter_in_words

SIGNIFICANT = 4


def reasons_of(ground: ProvingGround, found: Sequence[Found], together: str) -> StreamTuning:
    """What the searches of one stream found."""
    tried = dict.fromkeys(_plain(runner.candidate.preparation) for one in found for runner in one.first)
    place = {preparation: i for i, preparation in enumerate(tried)}
    return StreamTuning(
        unit=ground.around.analyte.unit,
        truncations=tuple(_truncation(ground, preparation) for preparation in tried),
        searches=tuple(_search(ground, one, place) for one in found),
        together=together,
    )


def _plain(preparation: Preparation) -> Preparation:
    """Truncation and transform alone."""
    return replace(preparation, baseline=None)


def _truncation(ground: ProvingGround, preparation: Preparation) -> Truncation:
    admit = admit_in_plan(preparation)
    admitted = np.isfinite(ground.training.prepared(preparation))
    return Truncation(
        low=admit.low,
        high=admit.high,
        mode=admit.mode,
        transform=preparation.transform,
        keeps=_rounded(float(admitted.mean())),
        moves=_rounded(slope(ground.training, preparation)),
    )


def _search(ground: ProvingGround, found: Found, place: dict[Preparation, int]) -> Search:
    mean = found.score.mean(axis=1)
    difference, error = difference_from(found.score, found.winner)
    faults = found.watch.faults
    alone = ground.schedule_alone(faults, ground.last_onsets(faults))
    best = {
        runner.candidate.statistic: i for i, runner in sorted(enumerate(found.finalists), key=lambda one: -mean[one[0]])
    }
    others = sorted(
        (i for name, i in best.items() if name != found.finalists[found.winner].candidate.statistic),
        key=lambda i: mean[i],
    )
    unit = ground.around.analyte.unit
    return Search(
        watches=found.watch.watches,
        candidates=len(found.first),
        rounds=found.rounds,
        chosen=candidate_in_words(found.chosen.candidate, unit),
        score=_rounded(float(mean[found.winner])),
        schedule_alone=_rounded(alone),
        runners_up=tuple(
            RunnerUp(
                words=candidate_in_words(found.finalists[i].candidate, unit),
                score=_rounded(float(mean[i])),
                error=_rounded(float(error[i])),
                costs=_rounded(float(difference[i] / mean[found.winner])) if mean[found.winner] > 0 else 0.0,
            )
            for i in others
        ),
        surfaces=_surfaces(found, place),
    )


def _surfaces(found: Found, place: dict[Preparation, int]) -> tuple[Surface, ...]:
    """One for each statistic and second parameter that was compared in the first round."""
    mean = found.first_score.mean(axis=1)
    grouped: dict[tuple[str, More], dict[tuple[int, float], float]] = {}
    for runner, score in zip(found.first, mean.tolist(), strict=True):
        one = runner.candidate
        cell = (place[_plain(one.preparation)], one.parameter)
        grouped.setdefault((one.statistic, one.more), {})[cell] = _rounded(score)
    return tuple(_surface(statistic, more, cells) for (statistic, more), cells in grouped.items())


def _surface(statistic: str, more: More, cells: dict[tuple[int, float], float]) -> Surface:
    rows, columns = (tuple(sorted({cell[axis] for cell in cells})) for axis in (0, 1))
    return Surface(
        statistic=STATISTICS[statistic].title,
        more=more_in_words(more),
        parameter=STATISTICS[statistic].parameter,
        columns=columns,
        rows=tuple(int(row) for row in rows),
        scores=tuple(tuple(cells.get((int(row), column)) for column in columns) for row in rows),
    )


def candidate_in_words(candidate: Candidate, unit: str) -> str:
    """A candidate in one sentence part, such as "EWMA, weight 0.05, results below 125 or above 155 mmol/L left out"."""
    law, prepared = STATISTICS[candidate.statistic], candidate.preparation
    parts = [
        law.title,
        parameter_in_words(candidate.statistic, candidate.parameter),
        more_in_words(candidate.more),
        admitted_in_words(admit_in_plan(prepared), unit),
    ]
    mix = ", adjusted for patient mix" if prepared.baseline is not None else ""
    return ", ".join(part for part in parts if part) + SCALES[prepared.transform] + mix


def more_in_words(more: More) -> str:
    """A candidate's second parameter, such as "beyond the outer 5 % on either side"; "" where it has none."""
    words = {"beyond": "beyond the outer {:.0%} on either side", "exponent": "exponent {:g}"}
    return ", ".join(words[name].format(x) for name, x in more)


def _rounded(x: float) -> float:
    return significant(x, SIGNIFICANT)
