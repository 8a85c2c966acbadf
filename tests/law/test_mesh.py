"""The mesh is closed, faces outward and keeps its promise of accuracy."""

import numpy as np
import pytest
from hand_built import cone_pocket, lens

from inverse.export import mesh

BOTH = pytest.mark.parametrize("stepped", [False, True])


@BOTH
def test_every_edge_is_shared_by_two_facets(stepped):
    """Each directed edge occurs once and its opposite once: watertight and consistently turned."""
    corners = mesh.facets(lens(stepped), 0.05).astype("f4")
    points, index = np.unique(corners.reshape(-1, 3), axis=0, return_inverse=True)
    index = index.reshape(-1, 3)
    edges = np.concatenate([index[:, [0, 1]], index[:, [1, 2]], index[:, [2, 0]]])
    assert len(np.unique(edges, axis=0)) == len(edges)
    assert set(map(tuple, edges)) == {(b, a) for a, b in edges}
    assert len(points) - len(edges) // 2 + len(index) == 2  # Euler: one closed surface without a hole


def volume(corners):
    return np.einsum("ij,ij->", corners[:, 0], np.cross(corners[:, 1], corners[:, 2])) / 6.0


@BOTH
def test_volume_within_error_times_surface(stepped):
    """Facets face outward (positive volume), and the volume misses by less than error × surface."""
    section, error = lens(stepped), 0.02
    corners = mesh.facets(section, error)
    surface = (
        np.linalg.norm(np.cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]), axis=1).sum()
        / 2
    )
    assert abs(volume(corners) - section.volume) < error * surface


def test_volume_of_a_turned_polygon():
    """With n steps round, a body of straight curves keeps n sin(2π/n) / 2π of its volume (closed form)."""
    section, whole = cone_pocket()
    corners = mesh.facets(section, 0.01)
    count = (
        len(np.unique(corners[corners[..., 2] == 7.0].round(9), axis=0)) - 1
    )  # rim points of the top, less axis
    assert volume(corners) == pytest.approx(
        whole * count * np.sin(2 * np.pi / count) / (2 * np.pi), rel=1e-12
    )


@pytest.mark.parametrize("error", [0.1, 0.01])
def test_chordal_error_holds(error):
    """Points all over every facet lie within the stated error of the turned curves, measured densely."""
    section = lens()
    corners = mesh.facets(section, error)
    weights = np.array([[1, 1, 1], [4, 1, 1], [1, 4, 1], [1, 1, 4], [1, 1, 0], [1, 0, 1], [0, 1, 1]], float)
    pick = np.random.default_rng(3).permutation(len(corners))[:200]
    inside = np.einsum("kw,nwx->nkx", weights / weights.sum(axis=1)[:, None], corners[pick]).reshape(-1, 3)
    meridian = np.column_stack([np.hypot(inside[:, 0], inside[:, 1]), inside[:, 2]])
    dense = section.dense(3000)[0][:, :2]
    away = [np.hypot(*(dense - p).T).min() for p in meridian]
    assert 0.2 * error < max(away) < error + 2e-3  # the dense points lie up to 4 µm apart


def test_file_layout(tmp_path):
    """80 bytes not starting with 'solid', a count, 50 bytes a facet with unit normal and corners."""
    path = tmp_path / "lens.stl"
    count = mesh.write(path, lens(), error=0.05, stamp={"version": "0.1.0"})
    content = path.read_bytes()
    assert len(content) == 84 + 50 * count and int.from_bytes(content[80:84], "little") == count
    assert not content.startswith(b"solid") and b"chordal error 0.05; version 0.1.0" in content[:80]
    table = np.frombuffer(content[84:], mesh.FACET)
    np.testing.assert_array_equal(table["corners"], mesh.facets(lens(), 0.05).astype("f4"))
    np.testing.assert_allclose(np.linalg.norm(table["normal"], axis=1), 1.0, atol=1e-6)


@pytest.mark.parametrize(
    "section, error, words",
    [
        (lens(), 0.0, "positive"),
        (lens(), float("nan"), "positive"),
        (lens(), 1e-9, "centre lens: .* chords"),
        (cone_pocket()[0], 1e-9, "steps round"),
    ],
)
def test_impossible_errors_are_refused(tmp_path, section, error, words):
    """No error at all, or one that would need millions of facets, is refused, and nothing is written."""
    with pytest.raises(ValueError, match=words):
        mesh.write(tmp_path / "lens.stl", section, error=error)
    assert list(tmp_path.iterdir()) == []
