"""Settings of the documentation build: `sphinx-build -q -W -b html docs docs/_build`."""

project = "detune"
author = "the authors of detune"
copyright = "the authors of detune"
extensions = ["myst_parser"]
source_suffix = {".md": "markdown"}
root_doc = "index"
exclude_patterns = ["_build"]
myst_heading_anchors = 3
html_theme = "alabaster"
html_theme_options = {"page_width": "1100px", "sidebar_width": "230px"}
html_show_sourcelink = False
