"""Promise 8: an edit of any C file takes effect in the next run; builds are whole, and failures say the remedy."""

from __future__ import annotations

import re
import shutil
import subprocess

import pytest

from pyharness.flight import BuildError, LayoutError, Library, SourcesError, find_sources
from pyharness.flight import build as building
from pyharness.flight.library import Interface

VERSION = Interface(find_sources()).header.constants["MRD_VERSION"]


@pytest.fixture
def copy(tmp_path):
    """A copy of the sources that a test may break."""
    shutil.copytree(find_sources().root, tmp_path / "fsw_c")
    return find_sources(tmp_path / "fsw_c")


@pytest.mark.parametrize("name", ["src/pulses.c", "src/arith.h", "include/mrd.h", "src/supervisor.h", "src/faults.c"])
def test_an_edit_of_any_file_is_built(copy, name):
    before = Library(sources=copy)
    digest = copy.digest
    path = copy.root / name
    path.write_text(path.read_text() + "\n/* edited */\n")
    after = Library(sources=copy)
    assert after.path != before.path
    assert copy.digest != digest


def test_the_same_sources_are_built_once(copy):
    first = Library(sources=copy).path
    stamp = first.stat().st_mtime_ns
    assert Library(sources=copy).path == first
    assert first.stat().st_mtime_ns == stamp


def test_broken_sources_leave_no_file(copy, tmp_path, monkeypatch):
    monkeypatch.setenv("XDG_CACHE_HOME", str(tmp_path / "cache"))
    (copy.root / "src" / "law.c").write_text("int broken(void) { return }\n")
    with pytest.raises(BuildError, match=r"mrd does not compile:[\s\S]*law\.c"):
        Library(sources=copy)
    assert not list((tmp_path / "cache" / "slackwater").iterdir())


def test_a_missing_compiler_is_told_with_the_remedy(monkeypatch):
    monkeypatch.setenv("CC", "no-such-compiler")
    with pytest.raises(BuildError, match=r"^no C compiler: 'no-such-compiler' was not found\. Install one .*apt install gcc"):
        building.compiler()


def test_no_sources_are_told(tmp_path):
    with pytest.raises(SourcesError, match="no controller sources here"):
        find_sources(tmp_path)


def foreign(copy, tmp_path) -> str:
    """Build a library from edited sources, as somebody else would."""
    target = tmp_path / "foreign.so"
    units = [str(path) for path in copy.c_files]
    subprocess.run(["cc", "-shared", "-fPIC", f"-I{copy.include}", *units, "-o", str(target)], check=True)
    return str(target)


def test_a_library_of_the_same_header_is_taken(copy, tmp_path):
    assert Library(foreign(copy, tmp_path)).lib.mrd_layout[0] == VERSION


def test_a_library_with_another_layout_is_refused(copy, tmp_path):
    header = copy.header.read_text()
    copy.header.write_text(re.sub(r"uint16_t mode;( +/. MRD_MODE_. .)", r"uint32_t mode;\1", header))
    with pytest.raises(LayoutError, match=r"foreign\.so: (size|offset) of mrd_\S+ is \d+, this header has"):
        Library(foreign(copy, tmp_path))


def test_a_library_of_another_version_is_refused(copy, tmp_path):
    text, built = copy.header.read_text(), f"MRD_VERSION = {VERSION},"
    assert built in text
    copy.header.write_text(text.replace(built, "MRD_VERSION = 77,"))
    library = foreign(copy, tmp_path)
    with pytest.raises(LayoutError, match=f"version is 77, this header has {VERSION}; build it from this header"):
        Library(library)


def test_a_library_without_a_layout_is_refused(copy, tmp_path):
    (copy.root / "src" / "layout.c").unlink()
    with pytest.raises(LayoutError, match="exports no layout table"):
        Library(foreign(copy, tmp_path))


def test_the_layout_table_names_every_field(library):
    """layout.c is written by hand: it must have an entry for each structure and field of the header."""
    meanings = [meaning for meaning, _ in library.interface.layout()]
    assert "size of mrd_outputs" in meanings
    assert "offset of mrd_path_config.blanking_us" in meanings
    assert len(meanings) == len(set(meanings))


def test_every_status_bit_and_refusal_has_a_text(library):
    header = library.interface.header
    for prefix in ("MRD_S_", "MRD_E_"):
        names = header.named(prefix)
        assert sorted(names) == list(range(min(names), min(names) + len(names)))
        assert all(header.texts[prefix + name] for name in names.values())
    assert len(header.named("MRD_S_")) == header.constants["MRD_S_COUNT"]


def test_modes_differ_in_two_bits(library):
    codes = sorted(library.interface.header.named("MRD_MODE_"))
    assert all((a ^ b).bit_count() >= 2 for a in codes for b in codes if a != b)


def test_only_the_header_itself_is_declared():
    """Nothing of the system's headers reaches cffi."""
    assert "int16_t matrix[9];" in Interface(find_sources()).header.declarations
    assert "typedef signed char" not in Interface(find_sources()).header.declarations
