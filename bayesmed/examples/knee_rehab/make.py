"""Makes knee_rehab.csv: an INVENTED trial of text-message coaching after knee surgery.

No patient ever took part: every number comes out of the random generator below. The true values stand here so
that an analysis can be held against them. ``python make.py [FOLDER]`` writes the file again, byte for byte.

What is true in the invented world
----------------------------------
240 patients, half of them coached (by lot). How a patient gets on is partly a matter of *drive*, which nobody
measured. It makes people exercise more, and by other ways (diet, sleep, practice on stairs) helps the knee.

    exercise = 105 + 24 coaching + 4 (confidence - 6) - 0.8 (age - 62) - 1.2 (bmi - 28) + e_M
    function = 58 + slope exercise + coaching + 1.2 (confidence - 6) - 0.2 (age - 62) - 0.4 (bmi - 28) + e_Y
    slope    = 0.022 (confidence - 4)     points of function per weekly minute of exercise
    e_M      = 16 drive + noise, SD 40    drive explains 0.16 of its variance
    e_Y      = 4.5 drive + noise, SD 9    drive explains 0.25 of its variance

Confidence decides how well the minutes are spent: at 8 well, at 4, where fear of the knee keeps the work too
light to help, not at all. It does not change how many minutes the coaching adds, so every term of the first
equation also stands in the second and the data say nothing about rho.

The residual correlation is sqrt(0.16 × 0.25) = 0.2. The indirect effect of coaching, in points of function,
is 24 × slope: 0 at confidence 4, 1.06 at 6 and 2.11 at 8. An analysis that takes the correlation to be 0
expects each too large by some 1.1 points (24 × 9/40 × 0.2/sqrt(1 - 0.2²)): at low confidence a benefit that
is not there.

The seed is one of some eighty tried, kept because chance alone does not blur that picture.
"""

import sys
from pathlib import Path

import numpy as np
import pandas as pd

SEED = 20_240_943
PATIENTS = 240

COACHING_ON_EXERCISE = 24.0
SLOPE_PER_CONFIDENCE, CONFIDENCE_WITHOUT_SLOPE = 0.022, 4.0
SIGMA_M, SIGMA_Y = 40.0, 9.0
SHARE_OF_EXERCISE, SHARE_OF_FUNCTION = 0.16, 0.25
TRUE_RHO = float(np.sqrt(SHARE_OF_EXERCISE * SHARE_OF_FUNCTION))


def true_indirect(confidence: float) -> float:
    """Return the true indirect effect of coaching at a level of confidence, in points of function."""
    return COACHING_ON_EXERCISE * SLOPE_PER_CONFIDENCE * (confidence - CONFIDENCE_WITHOUT_SLOPE)


def simulate(seed: int = SEED, patients: int = PATIENTS) -> pd.DataFrame:
    """Return the trial as a frame, rounded as such measures are written down, with a few values missing."""
    random = np.random.default_rng(seed)
    coaching = random.permutation(np.arange(patients) % 2)
    confidence = np.clip(np.round(random.normal(6.0, 2.0, patients)), 0, 10)
    age = np.clip(np.round(random.normal(62.0, 8.0, patients)), 40, 85)
    bmi = np.clip(np.round(random.normal(28.0, 4.0, patients), 1), 18.5, 45.0)

    drive, noise_m, noise_y = random.standard_normal((3, patients))
    e_m = SIGMA_M * (np.sqrt(SHARE_OF_EXERCISE) * drive + np.sqrt(1 - SHARE_OF_EXERCISE) * noise_m)
    e_y = SIGMA_Y * (np.sqrt(SHARE_OF_FUNCTION) * drive + np.sqrt(1 - SHARE_OF_FUNCTION) * noise_y)

    exercise = 105 + COACHING_ON_EXERCISE * coaching + 4 * (confidence - 6) - 0.8 * (age - 62)
    exercise = exercise - 1.2 * (bmi - 28) + e_m
    # A diary is kept in steps of five minutes, and nobody exercises less than not at all.
    exercise = np.maximum(5 * np.round(exercise / 5), 0)
    slope = SLOPE_PER_CONFIDENCE * (confidence - CONFIDENCE_WITHOUT_SLOPE)
    function = 58 + slope * exercise + coaching + 1.2 * (confidence - 6) - 0.2 * (age - 62) - 0.4 * (bmi - 28)
    function = np.clip(np.round(function + e_y), 0, 100)

    frame = pd.DataFrame(
        {
            "participant": [f"K{k:03d}" for k in range(1, patients + 1)],
            "coaching": coaching,
            "confidence": confidence.astype(int),
            "age": age.astype(int),
            "body_mass_index": bmi,
            "exercise": pd.array(exercise.astype(int), dtype="Int64"),
            "function": pd.array(function.astype(int), dtype="Int64"),
        }
    )
    # Diaries lost, visits missed and a scale out of order, regardless of what would have been read.
    rows = random.permutation(patients)
    frame.loc[rows[:4], "exercise"] = pd.NA
    frame.loc[rows[4:8], "function"] = pd.NA
    frame.loc[rows[8:10], "body_mass_index"] = np.nan
    return frame


def write(folder: Path) -> Path:
    """Write knee_rehab.csv into a folder and return its path."""
    path = folder / "knee_rehab.csv"
    path.write_bytes(simulate().to_csv(index=False, float_format="%.1f", lineterminator="\n").encode("ascii"))
    return path


if __name__ == "__main__":
    print(write(Path(sys.argv[1]) if len(sys.argv) > 1 else Path(__file__).parent))
