"""Standard errors of expanded visits.

The visits of a zone are a sum over its records, Y = Σ F v s (factor, visits of persons, adults
or vehicles, the site's share), and F is itself a ratio of sums over the sample. Linearised
(Taylor; Särndal, Swensson and Wretman, Model Assisted Survey Sampling, 1992, section 5.5, from
memory), a record moves Y by

    e = F v s, if it is of the zone, + Y a,

where a is what the record does to F in proportion: of a known total, v ÷ domestic (if it is
domestic) − v ÷ all − v ÷ with a zone (if it has one); of a household survey, − its weight over the
weights of all respondents. Records are taken to be drawn independently, each with the chance
1 ÷ (weight × F), so that

    Var(Y) = n ÷ (n − 1) × Σ (1 − chance) e²,

which is nothing where the records are all there is. Added to it are the counter's own variance,
(Y ÷ total)² × se², the variance of ready counts, and for a surveyed register that of the
means which stand in for the unsurveyed. A zone without a record has a standard error of 0: the
sample says nothing about how rare its visits are. Raked weights are taken as given.
"""

from __future__ import annotations

import numpy as np
import pandas as pd

from pipeline.expansion import Total, known_totals
from pipeline.parties import class_labels
from pipeline.visit_settings import VisitsSettings

KEY = ["site_id", "total_of", "season", "zone_id"]


def visits_variance(
    records: pd.DataFrame, origins: pd.DataFrame, visits: VisitsSettings
) -> pd.Series[float]:
    """Variance of the expanded visits, by `site_id, total_of, season, zone_id`.

    Parameters
    ----------
    records : as `expanded_records` gives them.
    origins : the `origins` table, for ready counts and surveyed registers.
    visits : the section [visits].
    """
    totals = known_totals(visits)
    frame = records.assign(
        expanded=records["factor"] * records["counted_visits"] * records["share"],
        pull=_pulls(records, totals, visits),
        missed=_missed(records, visits),
    )
    placed = frame[frame["is_placed"]]
    own = placed["missed"] * placed["expanded"]
    sums = (
        placed.assign(square=own * placed["expanded"], cross=own * placed["pull"])
        .groupby(KEY)
        .agg(y=("expanded", "sum"), square=("square", "sum"), cross=("cross", "sum"))
    )
    whole = _pull_squares(frame, visits).reindex(sums.index, fill_value=0.0)
    scale = _small_sample(records).reindex(_strata(sums)).to_numpy(dtype=float)
    y = sums["y"]
    sampling = (sums["square"] + 2 * y * sums["cross"] + y**2 * whole) * scale
    extra = _extra(frame, origins, visits).reindex(sums.index, fill_value=0.0)
    variance: pd.Series[float] = sampling.clip(lower=0.0) + _counter(y, totals) + extra
    return variance


def _missed(records: pd.DataFrame, visits: VisitsSettings) -> pd.Series[float]:
    """1 − the chance of having been drawn; ready counts are no sample."""
    if visits.kind == "zone_counts":
        return pd.Series(0.0, index=records.index)
    stands_for = (records["factor"] * records["weight"]).clip(lower=1.0)
    return 1 - 1 / stands_for.mask(~records["is_placed"], np.inf)


def _pulls(
    records: pd.DataFrame, totals: dict[tuple[str, str], Total], visits: VisitsSettings
) -> pd.Series[float]:
    """What each record does to the factor of its site and season, in proportion."""
    stratum = pd.MultiIndex.from_frame(records[["total_of", "season"]])
    by_total = pd.Series(stratum.isin(list(totals)), index=records.index)
    number = records["person_visits"]
    pull = (
        _part(number.where(records["is_domestic"], 0.0), records)
        - _part(number, records)
        - _part(number.where(records["is_placed"], 0.0), records)
    )
    if visits.kind != "household" or visits.household_expansion == "weights":
        return pull.where(by_total, 0.0)
    group = ["zone_id"] if visits.household_expansion == "zone_population" else []
    weight = records["weight"].where(records["is_placed"], 0.0)
    return pull.where(by_total, -_part(weight, records, group))


def _part(
    number: pd.Series[float], records: pd.DataFrame, group: list[str] | None = None
) -> pd.Series[float]:
    """Each record's part of the sum of its site and season (and group)."""
    keys = [records[name] for name in ("total_of", "season", *(group or []))]
    total = number.groupby(keys, dropna=False).transform("sum")
    return (number / total.where(total > 0, np.nan)).fillna(0.0)


def _pull_squares(frame: pd.DataFrame, visits: VisitsSettings) -> pd.Series[float]:
    """Σ (1 − chance) a² of the records that move a zone's factor, for every zone."""
    square = frame["missed"] * frame["pull"] ** 2
    if visits.kind == "household" and visits.household_expansion == "zone_population":
        return square.groupby([frame[name] for name in KEY]).sum()
    whole = square.groupby([frame["total_of"], frame["season"]]).transform("sum")
    return whole.groupby([frame[name] for name in KEY]).first()


def _strata(by_zone: pd.DataFrame | pd.Series[float]) -> pd.MultiIndex:
    """Site and season of each row of a table by site, season and zone."""
    levels = by_zone.index.to_frame(index=False)
    return pd.MultiIndex.from_frame(levels[["total_of", "season"]])


def _small_sample(records: pd.DataFrame) -> pd.Series[float]:
    """Factor n ÷ (n − 1) by site and season; 1 where there is a single record."""
    n = records.groupby(["total_of", "season"]).size().astype("float64")
    factor: pd.Series[float] = n / (n - 1).where(n > 1, n)
    return factor


def _counter(y: pd.Series[float], totals: dict[tuple[str, str], Total]) -> pd.Series[float]:
    """The counter's own variance, in proportion to the zone's part of the total."""
    relative = {key: total.std_error / total.visits for key, total in totals.items()}
    errors = np.array([relative.get(key, 0.0) for key in _strata(y)], dtype=float)
    variance: pd.Series[float] = (y * errors) ** 2
    return variance


def _extra(frame: pd.DataFrame, origins: pd.DataFrame, visits: VisitsSettings) -> pd.Series[float]:
    """Variance of ready counts, and of the means that stand in for unsurveyed records."""
    per_trip = frame["factor"] * _per_trip(frame)
    keys = [frame[name] for name in KEY]
    if visits.kind == "zone_counts" and "trips_se" in origins:
        errors = origins.loc[frame.index, "trips_se"].fillna(0.0) * frame["weight"]
        of_counts: pd.Series[float] = ((per_trip * errors) ** 2).groupby(keys).sum()
        return of_counts
    if visits.kind == "sample_of_register":
        return _stand_ins(frame, origins, visits)
    nothing: pd.Series[float] = (0.0 * per_trip).groupby(keys).sum()
    return nothing


def _per_trip(frame: pd.DataFrame) -> pd.Series[float]:
    """Visits that one trip of a record counts for."""
    number = frame["person_visits"]
    unit = (frame["counted_visits"] / number.where(number > 0)).fillna(1.0)
    return frame["people"] * unit * frame["share"]


def _stand_ins(
    frame: pd.DataFrame, origins: pd.DataFrame, visits: VisitsSettings
) -> pd.Series[float]:
    """Unsurveyed records take the means of their class: their variance, and their own spread.

    With T trips of unsurveyed records in a zone and class, s² the variance of the site's
    person-visits per trip among the surveyed and n of them, the zone's visits vary by
    Σ over classes (T² s² ÷ n + Σ trips² s²), times the factor squared.
    """
    trips = origins.loc[frame.index, "counted_trips"]
    label = class_labels(origins, visits.register_classes).loc[frame.index]
    surveyed = ~frame["is_filled"] & frame["is_domestic"]
    per_trip = _per_trip(frame)[surveyed]
    spread = per_trip.groupby(label[surveyed]).agg(["var", "size"])
    variance = label.map(spread["var"]).fillna(per_trip.var()).fillna(0.0)
    count = label.map(spread["size"]).fillna(1).clip(lower=1)
    filled = frame["is_filled"] & frame["is_placed"]
    scaled = (frame["factor"] * trips)[filled]
    keys = [frame.loc[filled, name] for name in KEY]
    grouped = [*keys, label[filled]]
    together = scaled.groupby(grouped).sum() ** 2
    per_mean = (variance / count)[filled].groupby(grouped).first()
    own = (scaled**2 * variance[filled]).groupby(keys).sum()
    of_means = (together * per_mean).groupby(level=KEY).sum()
    variance_of_zone: pd.Series[float] = of_means.add(own, fill_value=0.0)
    return variance_of_zone
