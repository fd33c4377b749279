"""The geocode stage: every visit record gets its zone of origin, or the reason why it has none."""

from __future__ import annotations

from typing import Any

import pandas as pd

from pipeline.errors import GeocodingError, StudyError
from pipeline.origins.codebook import MISSING, CodeBook
from pipeline.origins.points import place_points
from pipeline.origins.raking import rake_weights
from pipeline.parties import counted_trips, people_per_trip
from pipeline.stays import split_records
from pipeline.study import Study
from pipeline.tables import ORIGIN_STATUSES
from pipeline.visit_settings import VisitsSettings

REMEDIES = {
    "unknown_code": "origin_note names the nearest valid codes; add retired codes to the crosswalk",
    "malformed": "check [zones] postal_code_pattern and which column holds the code",
    "missing": "records without a code cannot be placed",
    "outside_zones": "add the zones that the points lie in",
}


def geocode(
    records: pd.DataFrame,
    zones: pd.DataFrame,
    crosswalk: pd.DataFrame | None,
    *,
    study: Study,
) -> tuple[pd.DataFrame, pd.DataFrame]:
    """Find the zone of every visit record by its postal code, or by the point of its home.

    A code that is damaged but can be read in one way only is matched, and `origin_note` says
    what was read back; one that is merely close to a valid code is not, and the note names the
    valid codes that are nearest. A record whose code leads to no zone is placed by its point,
    where it has one; one whose stated country is not the zones' is foreign.

    Parameters
    ----------
    records : the `visit_records` table.
    zones : the `zones` table; a postal code belongs to one zone.
    crosswalk : the `crosswalk` table, or None.
    study : reads [visits], [zones] and [sites] stays.

    Returns
    -------
    `origins` (one row per record, in their order; see `split_records` for stays that are kept
    apart) and `origin_summary`.

    Raises
    ------
    GeocodingError
        Two zones share a code, the crosswalk names a zone that does not exist, points are to
        be placed but the zones have no polygons, or a larger share of the records than
        [visits] max_unmatched_share has no zone.
    """
    if crosswalk is not None:
        _check_crosswalk(crosswalk, zones, study)
    origins = _placed_by_code(records, zones, crosswalk, study)
    if "lon" in records:
        origins = place_points(origins, zones)
    origins = _judged_by_country(origins, study.zones.country)
    origins = origins.drop(columns=["lon", "lat", "country"], errors="ignore")
    origins = rake_weights(origins, study.visits)
    origins = origins.assign(counted_trips=counted_trips(origins, study.visits.kind))
    summary = summarise_statuses(origins, study.visits)
    _check_counts(records, summary)
    _check_unmatched(origins, study.visits.max_unmatched_share)
    if study.sites.stays == "apart":
        origins = split_records(origins, study.visits.kind)
    return origins, summary


def _placed_by_code(
    records: pd.DataFrame, zones: pd.DataFrame, crosswalk: pd.DataFrame | None, study: Study
) -> pd.DataFrame:
    """The records with `postal_code, zone_id, origin_status, origin_note` by their codes."""
    book = CodeBook.of(
        zones,
        crosswalk,
        country=study.zones.country,
        pattern=study.zones.postal_code_pattern,
        foreign=study.visits.foreign_codes,
        foreign_countries=study.visits.foreign_countries,
    )
    # Millions of records share some thousand codes, so each written code is placed once.
    positions, written = pd.factorize(records["postal_code_raw"])
    placed = pd.DataFrame([*map(book.place, written), MISSING]).astype("str")
    # pd.factorize gives -1 to a missing code, which is the last placement.
    columns = placed.iloc[positions].set_axis(records.index)
    return records.assign(**{str(name): columns[name] for name in columns})


def _judged_by_country(origins: pd.DataFrame, home: str | None) -> pd.DataFrame:
    """Records whose country is stated: abroad is foreign, at home is not."""
    if "country" not in origins or origins["country"].isna().all():
        return origins
    if home is None:
        raise StudyError(
            "[visits.columns] country is read, but the study does not say in which country its "
            'zones lie; set it: [zones] country = "IS".'
        )
    stated = origins["country"]
    abroad = stated.notna() & (stated != home)
    strange = (stated == home) & (origins["origin_status"] == "foreign")
    note = origins["origin_note"].mask(abroad, "country: " + stated.fillna(""))
    return origins.assign(
        zone_id=origins["zone_id"].mask(abroad),
        origin_status=origins["origin_status"].mask(abroad, "foreign").mask(strange, "malformed"),
        origin_note=note.mask(strange, "code of another country, though the record is of ours"),
    )


def summarise_statuses(origins: pd.DataFrame, visits: VisitsSettings) -> pd.DataFrame:
    """The `origin_summary` table: records, trips and person-visits by site and status."""
    sizes = people_per_trip(origins, visits)
    frame = origins[["site_id", "origin_status", "trips"]].assign(
        person_visits=origins["counted_trips"] * sizes["people"], filled=sizes["is_filled"]
    )
    groups = frame.groupby(["site_id", "origin_status"], as_index=False, observed=True)
    summary = groups.agg(
        records=("trips", "size"),
        trips=("trips", "sum"),
        person_visits=("person_visits", "sum"),
        party_size_filled=("filled", "sum"),
    )
    total = summary.groupby("site_id")["records"].transform("sum")
    order = summary["origin_status"].map({name: i for i, name in enumerate(ORIGIN_STATUSES)})
    return (
        summary.assign(share=summary["records"] / total, order=order)
        .sort_values(["site_id", "order"], ignore_index=True)
        .drop(columns="order")
    )


def summarise_geocode(outputs: tuple[Any, ...]) -> str:
    """One line: how many records have which status."""
    summary = outputs[1]
    counts = summary.groupby("origin_status")["records"].sum()
    parts = [f"{counts[name]:,} {name}" for name in ORIGIN_STATUSES if name in counts]
    filled = int(summary["party_size_filled"].sum())
    note = f"; {filled:,} without party size take the mean" if filled else ""
    return f"{int(counts.sum()):,} records: {', '.join(parts)}{note}"


def _check_crosswalk(crosswalk: pd.DataFrame, zones: pd.DataFrame, study: Study) -> None:
    """Every code of the crosswalk goes to a zone that exists."""
    unknown = crosswalk[~crosswalk["zone_id"].isin(zones["zone_id"])]
    if unknown.empty:
        return
    path, columns = study.visits.crosswalk, study.visits.crosswalk_columns
    first = unknown.iloc[0]
    raise GeocodingError(
        f"{path.name if path else 'crosswalk'}: {len(unknown)} of {len(crosswalk)} codes go to a "
        f"zone that does not exist; first: {columns.postal_code} {first['postal_code']!r} to "
        f"{columns.zone_id} {first['zone_id']!r} (entry {unknown.index[0] + 1}). "
        "Correct the crosswalk, or add the zone to the zones file."
    )


def _check_counts(records: pd.DataFrame, summary: pd.DataFrame) -> None:
    """No record is lost: those of all statuses add up to what went in."""
    if summary["records"].sum() != len(records):
        raise GeocodingError(
            f"{len(records)} visit records went in, but {summary['records'].sum()} have a status; "
            "some have no site_id, so fill it in."
        )


def _check_unmatched(origins: pd.DataFrame, max_unmatched_share: float) -> None:
    """Stop when too many records have no zone; foreign ones are outside the market."""
    counts = origins["origin_status"].value_counts()
    foreign = int(counts.get("foreign", 0))
    domestic = len(origins) - foreign
    lost = counts[[status for status in counts.index if status in REMEDIES]]
    if domestic == 0 or lost.sum() <= max_unmatched_share * domestic:
        return
    breakdown = ", ".join(f"{count:,} {status}" for status, count in lost.items())
    worst = str(lost.idxmax())
    first = int((origins["origin_status"] == worst).to_numpy().argmax())
    row = origins.iloc[first]
    example = "" if worst == "missing" else f" with code {row['postal_code_raw']!r}"
    note = f" ({row['origin_note']})" if isinstance(row["origin_note"], str) else ""
    raise GeocodingError(
        f"{lost.sum():,} of {domestic:,} visit records ({lost.sum() / domestic:.1%}) have no zone: "
        f"{breakdown}; the study allows {max_unmatched_share:.1%}. "
        f"First {worst}: record {row['record_id']!r}{example}{note}. "
        f"Remedy: {REMEDIES[worst]}; or raise [visits] max_unmatched_share."
    )
