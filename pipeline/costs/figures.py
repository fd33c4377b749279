"""A study's figure for every row: its own, or its zone's; in prices of the study's year."""

from __future__ import annotations

import difflib
from dataclasses import dataclass

import pandas as pd

from pipeline.cost_settings import CostsSettings
from pipeline.errors import CostError


@dataclass(frozen=True)
class Figures:
    """Looks figures up: one per row.

    Attributes
    ----------
    settings : the study's [costs].
    zones : the `zones` table.
    zone_id : zone of each row.
    price_year : year whose prices everything is brought to.
    """

    settings: CostsSettings
    zones: pd.DataFrame
    zone_id: pd.Series[str]
    price_year: int

    def factor(self, key: str) -> float:
        """What brings an amount of `key` to the study's prices."""
        try:
            return self.settings.price_factor(key, self.price_year)
        except ValueError as error:
            raise CostError(f"[costs.price_years] {error}.") from None

    def each(self, key: str, default: float | None) -> pd.Series[float]:
        """Figure of every row: its zone's where the study names a column, else `default`.

        `key` is dotted below [costs]. An amount comes in the study's prices; a share as it is.

        Raises
        ------
        CostError
            The column is not there, or one of its figures is negative or no number.
        """
        column = self.settings.zone_columns.get(key)
        amount = self.factor(key.split(".", maxsplit=1)[0])
        filling = float("nan") if default is None else default
        if column is None:
            return pd.Series(filling * amount, index=self.zone_id.index)
        by_zone = self._column(column, key).set_axis(self.zones["zone_id"])
        found = self.zone_id.map(by_zone).astype("float64")
        return found.fillna(filling) * amount

    def _column(self, column: str, key: str) -> pd.Series[float]:
        if column not in self.zones:
            near = difflib.get_close_matches(column, list(self.zones.columns), n=1)
            hint = f" Did you mean {near[0]!r}?" if near else ""
            raise CostError(
                f"[costs.zone_columns] {key} = {column!r} is no column of the zones.{hint} Add it "
                "to the zones file, and name it in [zones] covariates."
            )
        values = pd.to_numeric(self.zones[column], errors="coerce")
        wrong = (values < 0) | (values.isna() & self.zones[column].notna())
        if wrong.any():
            row = int(wrong.to_numpy().argmax())
            raise CostError(
                f"zones: {int(wrong.sum())} value(s) in column {column!r} ([costs.zone_columns] "
                f"{key}) are negative or no number; first: {self.zones[column].iloc[row]!r} in "
                f"row {row + 1} (zone {self.zones['zone_id'].iloc[row]!r}). Correct the zones."
            )
        return values
