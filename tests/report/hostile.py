"""A study whose columns, levels, labels and title are written to do harm."""

import numpy as np

import bayesmed as bm
from bayesmed.report.findings import Findings, find

HOSTILE = '<img src=x onerror="window.harmed=1">"\'</script><script>window.harmed=1</script> & שלום 🦵 ' + "x" * 300


def hostile() -> Findings:
    """Findings of a study whose columns, levels, labels and title are written to do harm."""
    random = np.random.default_rng(1)
    names = {"x": "<script>window.harmed=1</script>", "m": "m " + HOSTILE, "g": 'g"><b>'}
    data = {
        names["x"]: np.tile([0, 1], 40),
        names["m"]: random.normal(size=80),
        names["g"]: np.tile(["=1+1", HOSTILE], 40)[random.permutation(80)],
        "y": random.normal(size=80),
    }
    m, x, g = (f"`{names[key]}`" for key in "mxg")
    study = bm.Study(data, exposure=names["x"], mediator=f"{m} ~ {x} + {g}", outcome=f"y ~ {m} * {g} + {x}")
    fit = study.fit(method="exact", draws=50, random_seed=1, progressbar=False)
    return find(fit.result, {HOSTILE: 0.0, "=1": bm.LKJ(2)}, None, title=HOSTILE)
