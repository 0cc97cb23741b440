"""Make the three demo tables: bean lots at an invented regional testing laboratory.

Run ``python demo_data/make_bean_lots.py``; the tables appear next to this file, with the same bytes
every time. All numbers are drawn from the recipe below: no lot, producer or laboratory is real.
README.md tells what each trap does to the score.
"""

import csv
from collections.abc import Iterable
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import NamedTuple

import numpy as np

RANDOM_SEED = 52
READINGS = 4
PRODUCERS = 46
MISSING_MOISTURES = 15
ROWS_ENTERED_TWICE = 6
LOTS_SUBMITTED_TWICE = 5

# How far lots in the same state differ in wear: 0 reads like a sound lot, 1 like a worn-out one.
WEAR_SPREAD = 0.1


class Feature(NamedTuple):
    """One measured column: where it lies, and how far each cause moves it."""

    name: str
    decimals: int
    centre: float  # a sound lot, an average year, instrument A
    wear: float  # from a sound to a worn-out lot
    climate: float  # from an average to a fully wet year
    channel: float  # from instrument A to instrument B
    lot_spread: float  # standard deviation between lots in the same state
    reading_spread: float  # standard deviation between readings of one lot


FEATURES = (
    Feature("leachate_conductivity", 1, 18.0, 17.0, 10.0, 0.0, 2.4, 0.6),
    Feature("moisture", 1, 13.0, 0.6, 1.2, 0.0, 0.5, 0.1),
    Feature("thousand_grain_weight", 1, 412.0, -26.0, 30.0, 0.0, 24.0, 4.0),
    Feature("sound_density", 3, 1.262, -0.060, -0.025, 0.0, 0.010, 0.003),
    Feature("hilum_colour_a", 2, 7.40, 3.10, 1.70, 1.10, 0.55, 0.17),
    Feature("hilum_colour_b", 2, 18.20, -2.60, -1.20, 1.10, 0.75, 0.20),
    Feature("nir_1", 3, -0.350, 2.600, 1.000, 1.200, 0.430, 0.100),
    Feature("nir_2", 3, 0.200, -1.900, 0.600, -0.800, 0.400, 0.100),
    Feature("nir_3", 3, 0.050, 0.600, -1.500, 1.000, 0.400, 0.090),
    Feature("nir_4", 3, -0.100, 0.240, 0.700, -1.400, 0.340, 0.090),
    Feature("age_months", 0, 12.0, 8.4, 0.0, 0.0, 2.6, 0.0),
)


class Season(NamedTuple):
    """One harvest year: the lots that came in, how wet it was, and where they were read.

    Some good lots are as worn as failing ones and still germinate. These lots, not noise, limit
    what any same-day screen can do.
    """

    year: int
    lots: int
    failing: int
    worn_but_good: int
    wetness: float
    share_on_b: float


# The wet year has most of the failing lots, and instrument B stood in for A during that year: year,
# instrument and verdict are entangled, as they are in many archives.
SEASONS = (
    Season(2021, 58, 8, 4, -0.4, 0.00),
    Season(2022, 62, 22, 6, 1.0, 0.95),
    Season(2023, 60, 8, 4, 0.2, 0.05),
)
NEXT_SEASON = Season(2024, 60, 6, 5, 0.4, 0.30)
UNLABELLED_SEASON = Season(2025, 25, 2, 2, 0.1, 0.30)

LOT_COLUMNS = ("lot", "producer", "harvest_year", "instrument", "operator")
LATER_COLUMNS = ("days_to_certificate", "present_practice", "verdict")
FEATURE_NAMES = tuple(feature.name for feature in FEATURES)
COLUMNS = (*LOT_COLUMNS, *FEATURE_NAMES, *LATER_COLUMNS)

Row = dict[str, str]


@dataclass(frozen=True)
class Lot:
    """One submitted lot: what is known about it, and its readings (readings x features)."""

    producer: int
    year: int
    instrument: str
    operator: str
    verdict: str
    days_to_certificate: int
    present_practice: str
    readings: np.ndarray = field(repr=False)


def draw_states(season: Season, rng: np.random.Generator) -> list[tuple[bool, float]]:
    """Draw, in order of submission, whether each lot of a season fails and how worn it reads."""
    order = rng.permutation(season.lots)
    failing = order < season.failing
    worn = order < season.failing + season.worn_but_good
    wear = worn + WEAR_SPREAD * rng.standard_normal(season.lots)
    return list(zip(failing.tolist(), wear.tolist(), strict=True))


def draw_readings(
    wear: float, season: Season, instrument: str, rng: np.random.Generator
) -> np.ndarray:
    """Draw the readings of one lot.

    Trap: the lot's own level is drawn once and shared by its readings, which differ far less among
    themselves than lots do. A model that has seen one reading of a lot recognises the others.
    """
    columns = []
    for feature in FEATURES:
        level = feature.centre + feature.wear * wear + feature.climate * season.wetness
        level += feature.channel * (instrument == "B")
        level += feature.lot_spread * rng.standard_normal()
        columns.append(level + feature.reading_spread * rng.standard_normal(READINGS))
    readings = np.column_stack(columns)
    age = FEATURE_NAMES.index("age_months")
    readings[:, age] = np.maximum(readings[:, age], 1.0)
    return readings


def draw_days_to_certificate(failing: bool, rng: np.random.Generator) -> int:
    """Draw the days until the certificate was issued.

    Trap: a failing lot is tested a second time, so its certificate is late. The column gives the
    verdict away, but nobody knows it on the day when the screen has to answer.
    """
    return round(rng.normal(17.0, 2.4) if failing else rng.normal(10.0, 1.9))


def draw_present_practice(failing: bool, rng: np.random.Generator) -> str:
    """Draw the answer of the present practice.

    It is a look at a handful of beans, right for most good lots and for hardly more than half of
    the failing ones: the floor that any model has to clear.
    """
    says_failing = rng.random() < (0.55 if failing else 0.13)
    return "failing" if says_failing else "good"


def draw_lot(
    failing: bool, wear: float, producer: int, season: Season, rng: np.random.Generator
) -> Lot:
    """Draw one lot of a season."""
    instrument = "B" if rng.random() < season.share_on_b else "A"
    return Lot(
        producer=producer,
        year=season.year,
        instrument=instrument,
        operator=str(rng.choice(("op1", "op2", "op3"), p=(0.45, 0.35, 0.20))),
        verdict="failing" if failing else "good",
        days_to_certificate=draw_days_to_certificate(failing, rng),
        present_practice=draw_present_practice(failing, rng),
        readings=draw_readings(wear, season, instrument, rng),
    )


def draw_producers(count: int, rng: np.random.Generator) -> np.ndarray:
    """Draw who sent each lot: each producer once while lots last, some of them often."""
    each_once = np.arange(1, PRODUCERS + 1)[:count]
    shares = 1.0 / np.arange(4, PRODUCERS + 4)
    often = rng.choice(PRODUCERS, size=count - len(each_once), p=shares / shares.sum()) + 1
    return rng.permutation(np.concatenate([each_once, often]))


def draw_lots(seasons: Iterable[Season], rng: np.random.Generator) -> list[Lot]:
    """Draw all lots, year by year, good and failing mixed as they came in."""
    seasons = tuple(seasons)
    producers = iter(draw_producers(sum(season.lots for season in seasons), rng).tolist())
    lots = []
    for season in seasons:
        for failing, wear in draw_states(season, rng):
            lots.append(draw_lot(failing, wear, next(producers), season, rng))
    return lots


def submit_some_twice(lots: list[Lot], rng: np.random.Generator) -> list[Lot]:
    """Submit some lots again a little later.

    Trap: the second submission has its own lot number but the very same readings. Splitting by lot
    number would still put the same lot on both sides.
    """
    chosen = rng.choice(len(lots) - 12, size=LOTS_SUBMITTED_TWICE, replace=False)
    submitted = list(lots)
    for position in sorted(chosen, reverse=True):
        submitted.insert(position + int(rng.integers(4, 12)), lots[position])
    return submitted


def blank_some_moistures(lots: list[Lot], rng: np.random.Generator, count: int) -> list[Lot]:
    """Leave some moisture readings empty, as when the oven was in use."""
    blanked = list(lots)
    moisture = FEATURE_NAMES.index("moisture")
    for cell in rng.choice(len(lots) * READINGS, size=count, replace=False):
        position, reading = divmod(int(cell), READINGS)
        readings = blanked[position].readings.copy()
        readings[reading, moisture] = np.nan
        blanked[position] = replace(blanked[position], readings=readings)
    return blanked


def enter_some_rows_twice(rows: list[Row], rng: np.random.Generator) -> list[Row]:
    """Enter some rows a second time, right after the first.

    Only rows of lots submitted once are chosen, so that the two kinds of duplicate stay apart.
    """

    def measured(row: Row) -> tuple[str, ...]:
        return tuple(row[name] for name in FEATURE_NAMES)

    seen = [measured(row) for row in rows]
    once = [position for position, values in enumerate(seen) if seen.count(values) == 1]
    entered = list(rows)
    for position in sorted(rng.choice(once, ROWS_ENTERED_TWICE, replace=False), reverse=True):
        entered.insert(position + 1, rows[position])
    return entered


def read_one_out_of_range(lots: list[Lot]) -> list[Lot]:
    """Give one lot a conductivity reading that no lot of the training table comes near."""
    position = len(lots) // 2
    readings = lots[position].readings.copy()
    readings[2, FEATURE_NAMES.index("leachate_conductivity")] = 71.4
    return [*lots[:position], replace(lots[position], readings=readings), *lots[position + 1 :]]


def to_rows(lots: Iterable[Lot], first_number: int) -> list[Row]:
    """Write lots as rows of text, one a reading, with lot numbers in order of submission."""
    rows = []
    for number, lot in enumerate(lots, start=first_number):
        about = {
            "lot": f"L{number:04d}",
            "producer": f"P{lot.producer:02d}",
            "harvest_year": str(lot.year),
            "instrument": lot.instrument,
            "operator": lot.operator,
            "days_to_certificate": str(lot.days_to_certificate),
            "present_practice": lot.present_practice,
            "verdict": lot.verdict,
        }
        for reading in lot.readings:
            measured = {
                feature.name: "" if np.isnan(value) else f"{value:.{feature.decimals}f}"
                for feature, value in zip(FEATURES, reading, strict=True)
            }
            rows.append(about | measured)
    return rows


def write(path: Path, rows: Iterable[Row], columns: Iterable[str] = COLUMNS) -> None:
    """Write rows as a CSV file, with the same line ends on every system."""
    with path.open("w", encoding="utf-8", newline="") as file:
        writer = csv.DictWriter(file, columns, extrasaction="ignore", lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


def make_training_rows() -> list[Row]:
    """Make the training table: 180 lots, 5 of them submitted twice, 6 rows entered twice."""
    rng = np.random.default_rng([RANDOM_SEED, 1])
    lots = draw_lots(SEASONS, rng)
    lots = blank_some_moistures(lots, rng, MISSING_MOISTURES)
    rows = to_rows(submit_some_twice(lots, rng), first_number=101)
    return enter_some_rows_twice(rows, rng)


def make_next_season_rows() -> list[Row]:
    """Make the later table with verdicts: another year, failing lots as rare as in routine."""
    rng = np.random.default_rng([RANDOM_SEED, 2])
    return to_rows(draw_lots([NEXT_SEASON], rng), first_number=301)


def make_unlabelled_rows() -> list[Row]:
    """Make the table of lots that await an answer: nothing in it is known only afterwards."""
    rng = np.random.default_rng([RANDOM_SEED, 3])
    lots = blank_some_moistures(draw_lots([UNLABELLED_SEASON], rng), rng, 1)
    return to_rows(read_one_out_of_range(lots), first_number=401)


def main(folder: Path = Path(__file__).parent) -> None:
    """Write the three tables."""
    write(folder / "bean_lots.csv", make_training_rows())
    write(folder / "bean_lots_next_season.csv", make_next_season_rows())
    answerable = (*LOT_COLUMNS, *FEATURE_NAMES)
    write(folder / "bean_lots_unlabelled.csv", make_unlabelled_rows(), answerable)


if __name__ == "__main__":
    main()
