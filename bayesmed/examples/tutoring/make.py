"""Makes tutoring.csv: an INVENTED lottery of tutoring hours in three kinds of school.

No pupil ever took part: every number comes out of the random generator below. The true values stand here so
that an analysis can be held against them. ``python make.py [FOLDER]`` writes the file again, byte for byte.

What is true in the invented world
----------------------------------
450 pupils, as many in village, town and city schools. A lottery gives each from 0 to 30 hours of tutoring over a
term. Tutoring makes pupils read more at home, and teaches them to get more out of it. How a pupil gets on is partly a
matter of *help at home*, which nobody measured: it makes for more reading, and by other ways for a better test.

    reading = 70 + more hours + 0.6 (earlier - 50) + e_M        minutes a week
    score   = 40 + slope reading + 0.05 hours + 0.5 (earlier - 50) + e_Y
    more    = 1.3 in villages, 1.0 in towns, 0.5 in cities      minutes a week per hour of tutoring
    slope   = base + 0.002 hours                                points per weekly minute
    base    = 0.06 in villages, 0.05 in towns, 0.01 in cities
    e_M     = 12 help + noise, SD 30                            help at home explains 0.16 of its variance
    e_Y     = 2.4 help + noise, SD 6                            and 0.16 of this one's

School changes both how much tutoring adds and what reading is worth, and both equations hold hours by school, so the
data say nothing about rho. The residual correlation is sqrt(0.16 × 0.16) = 0.16.

From 0 to 20 hours, the indirect effect with hours at 20 (the total natural one) is 20 more (base + 0.04): 2.6 points in
villages, 1.8 in towns and 0.5 in cities. With hours at 0 (the pure natural one) it is 20 more base: 1.56, 1.0 and 0.1.

The seed is one of some forty tried, kept because chance alone does not blur that picture.
"""

import sys
from pathlib import Path

import numpy as np
import pandas as pd

SEED = 2
PUPILS = 450

SCHOOLS = ("village", "town", "city")
MORE = {"village": 1.3, "town": 1.0, "city": 0.5}
BASE = {"village": 0.06, "town": 0.05, "city": 0.01}
SLOPE_PER_HOUR = 0.002
SIGMA_M, SIGMA_Y = 30.0, 6.0
SHARE_OF_READING, SHARE_OF_SCORE = 0.16, 0.16
TRUE_RHO = float(np.sqrt(SHARE_OF_READING * SHARE_OF_SCORE))


def true_indirect(school: str, hours: float = 20.0, held: float = 20.0) -> float:
    """Return the true indirect effect of so many hours against none, in points, with hours held at a value."""
    return MORE[school] * hours * (BASE[school] + SLOPE_PER_HOUR * held)


def simulate(seed: int = SEED, pupils: int = PUPILS) -> pd.DataFrame:
    """Return the programme as a frame, rounded as such measures are written down, with a few values missing."""
    random = np.random.default_rng(seed)
    school = np.array(SCHOOLS)[np.arange(pupils) % 3]
    hours = random.integers(0, 16, pupils) * 2.0
    earlier = np.clip(np.round(random.normal(50.0, 10.0, pupils)), 10, 90)

    help_at_home, noise_m, noise_y = random.standard_normal((3, pupils))
    e_m = SIGMA_M * (np.sqrt(SHARE_OF_READING) * help_at_home + np.sqrt(1 - SHARE_OF_READING) * noise_m)
    e_y = SIGMA_Y * (np.sqrt(SHARE_OF_SCORE) * help_at_home + np.sqrt(1 - SHARE_OF_SCORE) * noise_y)
    more, base = (np.array([of[each] for each in school]) for of in (MORE, BASE))
    # Nobody reads less than not at all.
    reading = np.maximum(np.round(70 + more * hours + 0.6 * (earlier - 50) + e_m), 0)
    score = 40 + (base + SLOPE_PER_HOUR * hours) * reading + 0.05 * hours + 0.5 * (earlier - 50) + e_y

    frame = pd.DataFrame(
        {
            "pupil": [f"T{k:03d}" for k in range(1, pupils + 1)],
            "school": school,
            "hours": hours.astype(int),
            "earlier_score": pd.array(earlier.astype(int), dtype="Int64"),
            "reading": pd.array(reading.astype(int), dtype="Int64"),
            "score": np.round(score, 1),
        }
    )
    # Diaries lost, a test day missed and earlier tests not found, regardless of what would have been read.
    rows = random.permutation(pupils)
    frame.loc[rows[:6], "reading"] = pd.NA
    frame.loc[rows[6:11], "score"] = np.nan
    frame.loc[rows[11:14], "earlier_score"] = pd.NA
    return frame


def write(folder: Path) -> Path:
    """Write tutoring.csv into a folder and return its path."""
    path = folder / "tutoring.csv"
    path.write_bytes(simulate().to_csv(index=False, float_format="%.1f", lineterminator="\n").encode("ascii"))
    return path


if __name__ == "__main__":
    print(write(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent))
