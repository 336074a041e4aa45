"""Sphinx configuration."""

from rupture import __version__

project = "rupture-backtrack"
author = "the rupture-backtrack developers"
copyright = f"2026, {author}"
release = version = __version__

extensions = [
    "myst_parser",
    "sphinx.ext.autodoc",
    "sphinx.ext.napoleon",
    "sphinx.ext.viewcode",
    "sphinx_gallery.gen_gallery",
]
myst_enable_extensions = ["dollarmath", "amsmath", "deflist", "colon_fence"]
source_suffix = {".md": "markdown", ".rst": "restructuredtext"}
exclude_patterns = ["_build"]
html_theme = "furo"
html_title = "rupture-backtrack"
autodoc_typehints = "description"
autodoc_member_order = "bysource"
napoleon_numpy_docstring = True
napoleon_google_docstring = False
nitpicky = False

sphinx_gallery_conf = {
    "examples_dirs": "../examples",
    "gallery_dirs": "gallery",
    "filename_pattern": r"/\d\d_",
    "abort_on_example_error": True,
    "download_all_examples": False,
    "show_memory": False,
    "min_reported_time": 5,
}
