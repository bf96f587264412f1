"""Make the data of the night work example from a stated model, so that the true effect is known.

    python make_data.py

Every risk of diabetes is a product of factors, so the risk ratio of night work is the same whatever the age, canteen
and family, and it can be worked out on paper: :func:`true_risk_ratio`.
"""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np

SEED = 20260101
PEOPLE = 12_000

AGES = ("under 35", "35 to 49", "50 and over")
AGE_SHARES = (0.35, 0.40, 0.25)
DEPOTS = ("Harbour", "Hill", "North", "Station")
DEPOT_SHARES = (0.3, 0.2, 0.3, 0.2)

NIGHTS_BY_AGE = (0.15, 0.35, 0.55)
NIGHTS_BY_DEPOT = (0.25, -0.10, 0.15, -0.10)
FRIED_BY_DEPOT = (0.85, 0.15, 0.70, 0.20)
SLEEP_DEBT = {False: 0.20, True: 0.60}

BASE_RISK = 0.020
RISK_BY_AGE = (1.0, 1.8, 3.0)
RISK_OF_FRIED = 1.8
RISK_OF_FAMILY = 2.0
RISK_OF_SLEEP_DEBT = 1.5
RISK_OF_NIGHTS = 1.25


def true_risk_ratio() -> float:
    """The total effect of night work: its own factor, times what it does through sleep debt."""
    through_sleep = {nights: 1 - share + share * RISK_OF_SLEEP_DEBT for nights, share in SLEEP_DEBT.items()}
    return RISK_OF_NIGHTS * through_sleep[True] / through_sleep[False]


def make_rows(people: int = PEOPLE, seed: int = SEED) -> list[dict[str, str | int]]:
    """People drawn from the model; an empty text is a missing value."""
    draw = np.random.default_rng(seed)

    def happens(probability: np.ndarray | float) -> np.ndarray:
        return draw.random(people) < probability

    age = draw.choice(len(AGES), people, p=AGE_SHARES)
    depot = draw.choice(len(DEPOTS), people, p=DEPOT_SHARES)
    evening = happens(0.3)
    family = happens(0.2)
    fried = happens(np.take(FRIED_BY_DEPOT, depot))
    nights = happens(np.clip(np.take(NIGHTS_BY_AGE, age) + np.take(NIGHTS_BY_DEPOT, depot) + 0.1 * evening, 0.02, 0.95))
    sleep_debt = happens(np.where(nights, SLEEP_DEBT[True], SLEEP_DEBT[False]))
    risk = BASE_RISK * np.take(RISK_BY_AGE, age) * RISK_OF_FRIED**fried * RISK_OF_FAMILY**family
    diabetes = happens(risk * RISK_OF_NIGHTS**nights * RISK_OF_SLEEP_DEBT**sleep_debt)
    sick_leave = happens(0.10 + 0.15 * nights + 0.30 * diabetes)
    age_known, fried_known = ~happens(0.01), ~happens(0.03)
    return [
        {
            "age": AGES[age[i]] if age_known[i] else "",
            "depot": DEPOTS[depot[i]],
            "canteen": ("fried" if fried[i] else "fresh") if fried_known[i] else "",
            "family_history": "yes" if family[i] else "no",
            "night_work": "rotating nights" if nights[i] else "days only",
            "sleep_debt": "yes" if sleep_debt[i] else "no",
            "sick_leave": "yes" if sick_leave[i] else "no",
            "diabetes": int(diabetes[i]),
        }
        for i in range(people)
    ]


def write_csv(path: Path) -> None:
    """Write the rows as CSV."""
    rows = make_rows()
    with path.open("w", encoding="utf-8", newline="") as stream:
        writer = csv.DictWriter(stream, fieldnames=list(rows[0]), lineterminator="\n")
        writer.writeheader()
        writer.writerows(rows)


if __name__ == "__main__":
    target = Path(__file__).with_name("night_work.csv")
    write_csv(target)
    print(f"wrote {target.name}; the true risk ratio is {true_risk_ratio():.3f}")
