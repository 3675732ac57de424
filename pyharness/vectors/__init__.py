"""Golden vectors: written from the exact model, replayed through any controller, told apart in physical units."""

from pyharness.vectors.check import check_folder, check_vector
from pyharness.vectors.files import NoVectors, VectorError, VectorFile, find_vectors, read_vector, to_text
from pyharness.vectors.tell import tell_folders_apart
from pyharness.vectors.verdict import Verdict
from pyharness.vectors.write import make_vectors, write_folder

__all__ = [
    "NoVectors", "Verdict", "VectorError", "VectorFile", "check_folder", "check_vector", "find_vectors", "make_vectors", "read_vector",
    "tell_folders_apart", "to_text", "write_folder",
]
