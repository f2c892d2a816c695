"""Small samples that make the compiler compile every loop there is."""

from __future__ import annotations

import numpy as np

from monitor.tail.gof import Bootstrap
from monitor.tail.judgement import Options
from monitor.tail.sample import Sample
from monitor.tail.scan import law_of
from monitor.tail.tail_fit import NoTail


def warm(*, whole: bool) -> None:
    """Fit and bootstrap one small sample under each law; see judge.compile_everything."""
    numbers = np.arange(1, 41)
    sizes = np.floor(400.0 / numbers)
    measured = Sample.of_sizes(sizes + 0.5)
    grid = Sample.of_cells(numbers * 20, numbers[::-1].astype(np.int64))
    for sample, options in (
        (measured, Options(replicates=2, min_tail=5, stop_early=False)),
        (Sample.of_sizes(sizes), Options(counting="whole", replicates=2, min_tail=5, stop_early=False)),
        (grid, Options(replicates=2, min_tail=5, stop_early=False)),
    ):
        if options.counting == "whole" and not whole:
            continue
        law = law_of(sample, options)
        fit = law.fit()
        if not isinstance(fit, NoTail):
            bootstrap = Bootstrap(law, fit, options)
            bootstrap.run()
            bootstrap.resampled()
