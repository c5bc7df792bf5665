"""What the residuals hide, in words."""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING

from relorbit.show.numbers import fixed, known, significant, with_error

if TYPE_CHECKING:
    from relorbit.derive.companion import CompanionSearch

WIDTH = 80


def companion_text(search: CompanionSearch) -> str:
    """The answer first, then the figures it rests on."""
    best, moved = search.wobble, search.drift
    period, period_error = with_error(best.period, best.period_sigma, 2)
    amplitude, amplitude_error = with_error(best.amplitude_mas, best.amplitude_sigma_mas, 2)
    north, north_error = with_error(moved.north, moved.north_sigma, 3)
    east, east_error = with_error(moved.east, moved.east_sigma, 3)
    lines = [
        textwrap.fill(f"{search.pair}: {search.text}.", WIDTH),
        "",
        f"measures looked at  {search.measures}",
        f"periods tried       {significant(search.period.min(), 3)} to "
        f"{significant(search.period.max(), 3)} years ({search.period.size})",
        f"best period         {period} +/- {period_error} years",
        f"amplitude           {amplitude} +/- {amplitude_error} mas",
        f"false alarm         {_share(best.probability)} (analytic, an upper bound), "
        f"{_share(best.probability_permuted)} (residuals shuffled)",
        f"fall of chi2        {fixed(best.gain, 1)}; {fixed(search.threshold_permuted, 1)} is "
        f"reached by chance in {100.0 * search.level:g} % of cases",
        f"drift               north {north} +/- {north_error}, east {east} +/- {east_error} "
        f"mas/yr, chance {_share(moved.probability)}",
    ]
    if known(best.mass_minimum) and search.found:
        lines.append(
            f"least mass          {significant(best.mass_minimum, 2)} suns, for a dark body around "
            "one of two equal stars"
        )
    return "\n".join(lines)


def _share(probability: float) -> str:
    if probability < 1e-6:
        return "below 0.000001"
    return f"{probability:.4f}" if probability < 0.01 else f"{probability:.2f}"
