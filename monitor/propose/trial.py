"""The proposed format tried on the sample with the daemon's own parser: what it takes, and at what rate."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from monitor.parse import LineFormat, compile_parser
from monitor.parse.lines import ParsedLines, ParseSetupError
from monitor.propose.records import RejectedLine
from monitor.propose.samples import FileSample, Piece
from monitor.rejects import FIELD_MISSING

_SAMPLES, _SAMPLES_ALIKE = 10, 3
_DAY = 86_400e9


@dataclass(slots=True)
class Trial:
    """What the parser made of the sample.

    events          usable lines; by_stream, of each stream
    first, last     ns between which nearly all events lie, None without times
    per_day         events a day of the whole log, None when it cannot be told
    """

    events: int = 0
    lines: int = 0
    by_stream: Counter[str] = field(default_factory=Counter)
    rejected: Counter[str] = field(default_factory=Counter)
    skipped: Counter[str] = field(default_factory=Counter)
    samples: list[RejectedLine] = field(default_factory=list)
    troubles: list[str] = field(default_factory=list)
    first: int | None = None
    last: int | None = None
    per_day: float | None = None


def try_format(format_: LineFormat, files: tuple[FileSample, ...]) -> Trial:
    """Parse the whole sample."""
    parser = compile_parser(format_)
    trial = Trial()
    all_stamps: list[NDArray[np.int64]] = []
    expected = 0.0
    for file in files:
        events_before, read = trial.events, sum(len(piece.data) for piece in file.pieces)
        header = file.pieces[0].data.partition(b"\n")[0].removesuffix(b"\r") if file.pieces else None
        for i, piece in enumerate(file.pieces):
            try:
                parsed = parser.parse(piece.data, header=header, first=i == 0)
            except ParseSetupError as error:
                trial.troubles.append(f"{file.name} would be rejected whole: {error}")
                trial.rejected[FIELD_MISSING] += piece.data.count(b"\n")
                continue
            _count(trial, parsed, file, piece)
            if parsed.stamps is not None and parsed.stamps.size:
                all_stamps.append(parsed.stamps)
        found = trial.events - events_before
        expected += found if file.size is None or not read else found * max(1.0, file.size / read)
    if all_stamps:
        _rate(trial, all_stamps, expected, known=all(file.size is not None for file in files))
    return trial


def _count(trial: Trial, parsed: ParsedLines, file: FileSample, piece: Piece) -> None:
    trial.events += parsed.sizes.size
    trial.lines += parsed.lines
    trial.rejected.update(parsed.rejected)
    trial.skipped.update(parsed.skipped)
    for code, count in enumerate(np.bincount(parsed.stream_codes, minlength=len(parsed.streams)).tolist()):
        if count:
            trial.by_stream[parsed.streams[code]] += count
    for line in parsed.samples:
        alike = sum(sample.reason == line.reason for sample in trial.samples)
        if alike < _SAMPLES_ALIKE and len(trial.samples) < _SAMPLES:
            place = f"{file.name} byte {piece.offset + line.offset}"
            text = line.text.decode("utf-8", "backslashreplace")
            trial.samples.append(RejectedLine(reason=line.reason, place=place, text=text))


def _rate(trial: Trial, stamps: list[NDArray[np.int64]], expected: float, *, known: bool) -> None:
    """Events a day: of the whole log, or (when its length is not known) inside the sampled pieces."""
    together = np.concatenate(stamps)
    low, high = np.quantile(together, [0.001, 0.999], method="nearest")  # a stray stamp must not stretch it
    trial.first, trial.last = int(low), int(high)
    if known:
        span, count = float(high - low), expected
    else:
        span = sum(float(np.ptp(np.quantile(s, [0.001, 0.999], method="nearest"))) for s in stamps)
        count = float(together.size)
    if span > 0 and together.size >= 3:
        trial.per_day = count / span * _DAY
