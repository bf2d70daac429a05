"""Whatever stands in a file, a draft is a study file or an error of our own."""

from __future__ import annotations

import tomllib
from contextlib import suppress
from pathlib import Path
from tempfile import TemporaryDirectory

from hypothesis import given, settings
from hypothesis import strategies as st

from reweight.drafting import draft_studies, study_text
from reweight.errors import ReweightError, StudyError
from reweight.study import parse_study

WORDS = """\
T t energy E[eV] E/N potential[kJ/mol/atom] V[nm^3] beta step time[ps] L=8 N=12 300K T=310 1 2.5 -3e300 1,5 nan
400 999999999999999999999 units: in energy " \\ # [ ] = ? \u202e \x1b"""
WORD = st.sampled_from(WORDS.split())
LINE = st.lists(WORD, max_size=5).map(" ".join)
FILE = st.lists(LINE, max_size=12).map(lambda lines: "\n".join(lines).encode() + b"\n") | st.binary(
    max_size=60
)
NAME = st.text(st.characters(exclude_categories=["Cs"], exclude_characters="/\0"), min_size=1, max_size=20)


@settings(max_examples=150, deadline=None)
@given(
    st.dictionaries(
        NAME.filter(lambda name: name not in {".", ".."} and len(name.encode()) < 200),
        FILE,
        min_size=1,
        max_size=3,
    )
)
def test_a_draft_is_a_study_file_whatever_the_files_hold(files):
    with TemporaryDirectory() as name:
        folder = Path(name)
        paths = [folder / each for each in files]
        for path, content in zip(paths, files.values(), strict=True):
            path.write_bytes(content)
        try:
            drafts = draft_studies(paths)
        except ReweightError:
            return
        drafted = []
        for draft in drafts:
            text = study_text(draft, folder)
            values = tomllib.loads(text)
            assert all(line.isprintable() for line in text.split("\n"))
            drafted += [
                file for table in ("run", "replica") for run in values.get(table, []) for file in run["files"]
            ]
            drafted += [look.path.name for look in draft.unplaced]
            with suppress(
                StudyError
            ):  # what is open, and what no study may hold, such as a temperature of zero
                parse_study(text, folder=folder)
        assert sorted(drafted) == sorted(files)
