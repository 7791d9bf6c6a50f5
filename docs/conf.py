"""Sphinx settings: pages are run as they are built, and every warning is an error."""

import os
import sys
from importlib import metadata
from pathlib import Path
from typing import Any

sys.path.insert(0, str(Path(__file__).parent / "_extensions"))

# Kernels are processes of their own; threads of linear algebra and colours would only get in the way.
os.environ.update(OMP_NUM_THREADS="1", OPENBLAS_NUM_THREADS="1", NO_COLOR="1", COLUMNS="110")
os.environ["PYDEVD_DISABLE_FILE_VALIDATION"] = "1"
os.environ["PYTHONPATH"] = os.pathsep.join([str(Path(__file__).parents[1]), os.environ.get("PYTHONPATH", "")])

project = "bayesmed"
release = metadata.version("bayesmed")
author = "the authors of bayesmed"
project_copyright = "the authors of bayesmed, Apache-2.0"

extensions = ["myst_nb", "sphinx.ext.autodoc", "numpydoc", "mathml", "catalogue", "one_kernel"]
html_math_renderer = "mathml"
exclude_patterns = ["_build", "LICENSE"]
root_doc = "index"
nitpicky = True

myst_enable_extensions = ["deflist", "dollarmath", "colon_fence"]
myst_heading_anchors = 3

nb_execution_mode = "inline"
nb_execution_raise_on_error = True
nb_execution_timeout = 300
nb_execution_show_tb = True
nb_merge_streams = True
nb_output_stderr = "error"

autodoc_typehints = "none"
autodoc_member_order = "bysource"
numpydoc_show_class_members = False

html_theme = "pydata_sphinx_theme"
html_title = "bayesmed"
html_static_path = ["_static"]
html_css_files = ["pages.css"]
html_show_sourcelink = False
html_copy_source = False
html_theme_options = {
    "show_prev_next": True,
    "navigation_with_keys": False,
    "secondary_sidebar_items": ["page-toc"],
    "footer_start": ["copyright"],
    "footer_end": [],
    "search_bar_text": "Search",
    "pygments_light_style": "default",
    "pygments_dark_style": "github-dark",
}
html_sidebars = {"index": [], "start": []}


def setup(app: Any) -> None:
    """Leave out the page of timings until `tests/benchmarks` has written it."""
    app.connect("source-read", _list_performance)


def _list_performance(app: Any, page: str, source: list[str]) -> None:
    if page == "more" and Path(app.srcdir, "performance.md").exists():
        source[0] = source[0].replace("calibration\n", "calibration\nperformance\n")
