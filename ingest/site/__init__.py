"""The site file: what is installed, checked as a whole, with errors that name file, line and key."""

from __future__ import annotations

from ingest.site.differences import Difference, differences
from ingest.site.loading import load, load_text
from ingest.site.models import Site
from ingest.site.problems import Problem, SiteFileError

__all__ = ["Difference", "Problem", "Site", "SiteFileError", "differences", "load", "load_text"]
