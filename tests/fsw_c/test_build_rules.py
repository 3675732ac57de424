"""Promise 9: no floating point, heap, recursion or compiler-dependent behaviour; and no warnings."""

from __future__ import annotations

import re
import shutil
import subprocess
from pathlib import Path

import pytest

from pyharness.flight import find_sources

STRICT = ["-std=c99", "-Wall", "-Wextra", "-Wconversion", "-Wsign-conversion", "-Wshadow", "-Wpedantic", "-Werror"]
SOURCES = find_sources()


def compile_all(cc: str, folder: Path, *flags: str) -> list[Path]:
    """Compile every unit; returns the objects. Fails with the compiler's words."""
    objects = []
    for unit in SOURCES.c_files:
        target = folder / f"{unit.stem}.o"
        done = subprocess.run([cc, *flags, f"-I{SOURCES.include}", "-c", str(unit), "-o", str(target)], capture_output=True, text=True)
        assert done.returncode == 0, done.stderr
        objects.append(target)
    return objects


def needed(name: str) -> str:
    return shutil.which(name) or pytest.skip(f"{name} is not installed")


@pytest.mark.parametrize("cc", ["gcc", "clang"])
@pytest.mark.parametrize("level", ["-O0", "-O2", "-Os"])
def test_no_warnings(cc, level, tmp_path):
    compile_all(needed(cc), tmp_path, *STRICT, level)


def test_the_header_stands_alone_and_in_cpp(tmp_path):
    for name, flags in (("only.c", STRICT), ("only.cpp", ["-Wall", "-Werror", "-x", "c++"])):
        source = tmp_path / name
        source.write_text('#include "mrd.h"\nint mrd_only;\n')
        done = subprocess.run([needed("gcc"), *flags, f"-I{SOURCES.include}", "-fsyntax-only", str(source)], capture_output=True, text=True)
        if name == "only.cpp" and "cc1plus" in done.stderr:
            pytest.skip("no C++ compiler is installed")
        assert done.returncode == 0, done.stderr


def test_no_floating_point(tmp_path):
    """With the floating-point registers taken away the compiler refuses any use of them."""
    if "x86_64" not in subprocess.run(["gcc", "-dumpmachine"], capture_output=True, text=True).stdout:
        pytest.skip("-mgeneral-regs-only is checked on x86-64")
    compile_all(needed("gcc"), tmp_path, *STRICT, "-O2", "-mgeneral-regs-only")
    text = "".join(path.read_text() for path in SOURCES.all_files)
    assert not re.search(r"\b(float|double)\b", re.sub(r"/\*.*?\*/", "", text, flags=re.DOTALL))


def test_nothing_is_needed_but_block_copies(tmp_path):
    """No heap, no library, no 64-bit helpers: whatever is undefined is our own, or a copy or fill of a structure."""
    objects = compile_all(needed("gcc"), tmp_path, *STRICT, "-O2")
    listed = subprocess.run([needed("nm"), "-g", *map(str, objects)], capture_output=True, text=True, check=True).stdout
    defined = set(re.findall(r"^[0-9a-f]+ [A-Z] (\w+)$", listed, re.MULTILINE))
    undefined = set(re.findall(r"^\s+U (\w+)$", listed, re.MULTILINE))
    assert undefined - defined <= {"memcpy", "memset", "_GLOBAL_OFFSET_TABLE_"}


def test_no_writable_data(tmp_path):
    """All that changes belongs to the caller: no variable of the controller's own."""
    objects = compile_all(needed("gcc"), tmp_path, *STRICT, "-O2")
    listed = subprocess.run([needed("nm"), *map(str, objects)], capture_output=True, text=True, check=True).stdout
    assert not re.findall(r"^[0-9a-f]+ [BbDdC] \w+$", listed, re.MULTILINE)


def test_no_recursion(tmp_path):
    """The call graph that gcc writes has no cycle."""
    compile_all(needed("gcc"), tmp_path, *STRICT, "-O0", "-fcallgraph-info")
    edges: dict[str, set[str]] = {}
    for graph in tmp_path.glob("*.ci"):
        for caller, callee in re.findall(r'edge: \{ sourcename: "([^"]+)" targetname: "([^"]+)"', graph.read_text()):
            edges.setdefault(caller.rpartition(":")[2], set()).add(callee.rpartition(":")[2])
    assert "mrd_step" in edges
    finished: set[str] = set()

    def visit(name: str, above: tuple[str, ...]) -> None:
        assert name not in above, f"recursion: {' > '.join([*above, name])}"
        if name not in finished:
            for callee in edges.get(name, ()):
                visit(callee, (*above, name))
            finished.add(name)

    for name in list(edges):
        visit(name, ())


def test_every_loop_is_bounded_by_a_constant():
    """The only loops are counted ones, up to a constant or to an array's length handed in."""
    text = re.sub(r"/\*.*?\*/", "", "".join(path.read_text() for path in SOURCES.c_files), flags=re.DOTALL)
    assert not re.search(r"\b(while|goto|do)\b", text)
    loops = re.findall(r"for \((.*?)\)", text)
    assert loops
    for loop in loops:
        assert re.fullmatch(r"(\w+) = 0; \1 < (\d+u|count); \1\+\+", loop), loop
