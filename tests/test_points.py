"""Values between scattered points: exact for linear fields, third order, and honest about the error."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from fluxmesh.errors import FieldError
from fluxmesh.field.points import PointCloud
from fluxmesh.field.points_interpolation import index_cloud, interpolate_cloud
from fluxmesh.field.points_sampling import distinct_points, leave_out_error, sample_cloud
from fluxmesh.field.points_stencil import compact_weight, shape_factors


def smooth(x: np.ndarray) -> np.ndarray:
    """Two fields with derivatives of every order."""
    return np.column_stack(
        [
            np.sin(3 * x[:, 0]) * np.cos(2 * x[:, 1]) + x[:, 2] ** 2 * np.exp(0.7 * x[:, 0]),
            np.exp(x[:, 0] - x[:, 1] * x[:, 2]) * np.cos(3 * x[:, 2]),
        ]
    )


def rms(errors: np.ndarray) -> float:
    return float(np.sqrt(np.mean(errors**2)))


def rotation(generator: np.random.Generator) -> np.ndarray:
    turned, _ = np.linalg.qr(generator.normal(size=(3, 3)))
    return turned


def wall_layer(first: float = 1e-4, columns: int = 16, seed: int = 0) -> tuple[np.ndarray, np.ndarray]:
    """Points in rows normal to the wall z = 0, from `first` on each step 1.3 times the last; and the heights."""
    generator = np.random.default_rng(seed)
    spacing = 1 / columns
    steps = first * 1.3 ** np.arange(60)
    heights = np.concatenate([[0.0], np.cumsum(steps[steps < spacing])])
    heights = np.concatenate([heights, np.arange(heights[-1] + spacing, 0.5, spacing)])
    along = (np.arange(columns) + 0.5) * spacing
    x, y = (a.ravel() for a in np.meshgrid(along, along))
    x, y = (a + generator.uniform(-0.2, 0.2, a.size) * spacing for a in (x, y))
    return np.concatenate([np.column_stack([x, y, np.full(x.size, z)]) for z in heights]), heights


# --- linear fields -------------------------------------------------------------------------------------------------


@settings(deadline=None, max_examples=60)
@given(
    seed=st.integers(0, 2**32 - 1),
    count=st.integers(12, 300),
    size=st.floats(1e-4, 1e3),
    far=st.floats(0, 1e5),
    squeeze=st.floats(1e-3, 1),
)
def test_linear_fields_are_exact(seed: int, count: int, size: float, far: float, squeeze: float) -> None:
    generator = np.random.default_rng(seed)
    turn, shift = rotation(generator), far * size * generator.uniform(-1, 1, 3)
    cloud = generator.uniform(-1, 1, (count, 3)) * [1, 1, squeeze] @ turn * size + shift
    # within the cloud, and on its rim: mixtures of few points and the points themselves
    mixing = generator.dirichlet(np.full(4, 0.3), 30)
    within = np.einsum("pk,pkc->pc", mixing, cloud[generator.integers(0, count, (30, 4))])
    places = np.concatenate([within, cloud[:5]])
    slope, constant = generator.normal(size=(3, 2)), generator.normal(size=2)

    def field(x: np.ndarray) -> np.ndarray:
        return (x - shift) / size @ slope + constant

    found = interpolate_cloud(cloud, field(cloud), places, reach=np.inf)
    assert (found.degree >= 1).all()
    # rounding of a coordinate far out, as a share of the size, is the field's own rounding
    assert_allclose(found.values, field(places), rtol=0, atol=1e-12 + 1e-14 * far)


def test_linear_fields_are_exact_in_a_wall_layer() -> None:
    cloud, heights = wall_layer(1e-5)
    generator = np.random.default_rng(1)
    places = np.column_stack([generator.uniform(0.1, 0.9, (500, 2)), generator.choice(heights[:20], 500)])
    found = interpolate_cloud(cloud, cloud, places)
    assert (found.degree >= 1).all()
    assert_allclose(found.values, places, rtol=0, atol=1e-13)


def test_four_points_are_enough() -> None:
    corners = np.vstack([np.zeros(3), np.eye(3)])
    found = interpolate_cloud(corners, corners @ [[1.0], [2.0], [-3.0]], np.array([[0.2, 0.3, 0.1], [0, 0, 0.5]]))
    assert_allclose(found.values[:, 0], [0.5, -1.5], rtol=0, atol=1e-14)


def test_order_of_points_and_places_is_of_no_account() -> None:
    generator = np.random.default_rng(2)
    cloud, places = generator.uniform(0, 1, (3000, 3)), generator.uniform(0, 1, (9000, 3))
    one = interpolate_cloud(cloud, smooth(cloud), places).values
    points, order = generator.permutation(3000), generator.permutation(9000)
    other = interpolate_cloud(cloud[points], smooth(cloud[points]), places[order]).values
    assert_allclose(other, one[order], rtol=0, atol=1e-12)


# --- accuracy ------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("at_rim", [False, True])
def test_the_error_is_of_third_order(at_rim: bool) -> None:
    generator = np.random.default_rng(3)
    places = generator.uniform(0.1, 0.9, (2000, 3))
    if at_rim:
        places[:, 0] = 0.0
    errors = []
    for count in (1000, 8000, 64000):  # half the spacing each time
        cloud = generator.uniform(0, 1, (count, 3))
        errors.append(rms(interpolate_cloud(cloud, smooth(cloud), places).values - smooth(places)))
    orders = np.log2(np.divide(errors[:-1], errors[1:]))
    assert (orders > 2.6).all(), orders
    assert errors[-1] < 2e-4


def test_a_quadratic_is_given_back_all_but_exactly() -> None:
    generator = np.random.default_rng(4)
    cloud, places = generator.uniform(-1, 1, (2000, 3)), generator.uniform(-1, 1, (500, 3))

    def field(x: np.ndarray) -> np.ndarray:
        return (x[:, :1] - 0.5 * x[:, 1:2]) ** 2 + x[:, 1:2] * x[:, 2:]

    # the ridge on the products takes about 1e-3 of what a linear fit would miss
    misses = np.abs(interpolate_cloud(cloud, field(cloud), places).values - field(places))
    assert rms(misses) < 1e-4
    assert misses.max() < 2e-3


def test_a_profile_across_a_wall_layer_is_kept_between_rows() -> None:
    # The nearest 40 points stand in few rows; 160 around span the layer but smear it: error 0.2 and more.
    def field(x: np.ndarray) -> np.ndarray:
        return np.column_stack([1 - np.exp(-x[:, 2] / (1e-3 * (1 + x[:, 0]))), np.sin(3 * x[:, 0]) * x[:, 1]])

    cloud, _ = wall_layer(1e-4)
    generator = np.random.default_rng(5)
    for z in (np.zeros(400), generator.uniform(0, 1e-3, 400)):
        places = np.column_stack([generator.uniform(0.1, 0.9, (400, 2)), z])
        misses = interpolate_cloud(cloud, field(cloud), places).values - field(places)
        assert rms(misses[:, 0]) < 5e-3
        assert rms(misses[:, 1]) < 1e-3


def test_points_of_a_surface_serve_the_facets_between_them() -> None:
    errors = []
    for rings in (20, 40, 80):
        theta, phi = np.meshgrid(np.pi * (np.arange(rings) + 0.5) / rings, np.pi * np.arange(2 * rings) / rings)
        across = np.sin(theta)
        cloud = np.stack([across * np.cos(phi), across * np.sin(phi), np.cos(theta)], axis=-1)
        middles = (
            0.25 * (cloud[1:, 1:] + cloud[:-1, 1:] + cloud[1:, :-1] + cloud[:-1, :-1])[:, rings // 4 : -rings // 4]
        )
        places = middles.reshape(-1, 3)
        found = interpolate_cloud(cloud.reshape(-1, 3), smooth(cloud.reshape(-1, 3)), places)
        assert (found.degree >= 1).all()
        errors.append(rms(found.values - smooth(places)))
    # a facet lies off the surface by the square of the spacing, and the slope across is not known there
    orders = np.log2(np.divide(errors[:-1], errors[1:]))
    assert (orders > 1.7).all(), orders


def test_points_of_a_surface_keep_the_quadratic_along_it() -> None:
    # Near a smooth surface the height is all but a quadratic of the two others: the products are hardly
    # determined, which without a ridge lets noise grow tenfold and more.
    along = np.linspace(0, 1, 80)
    x, y = np.meshgrid(along, along)
    surface = np.stack([x, y, 0.2 * np.sin(4 * x) * np.cos(3 * y)], axis=-1)
    middles = 0.25 * (surface[1:, 1:] + surface[:-1, 1:] + surface[1:, :-1] + surface[:-1, :-1]).reshape(-1, 3)
    points = surface.reshape(-1, 3)
    found = interpolate_cloud(points, smooth(points), middles)
    assert (found.degree == 2).all()
    assert found.amplification.max() < 5
    assert rms(found.values - smooth(middles)) < 1e-4


def test_rounded_coordinates_of_a_plane_make_up_no_slope() -> None:
    generator = np.random.default_rng(6)
    flat = np.column_stack([generator.uniform(0, 1, (2000, 2)), np.zeros(2000)])
    cloud = np.concatenate([flat + generator.uniform(-1e-7, 1e-7, flat.shape), [[0.5, 0.5, 5.0]]])
    places = np.column_stack([generator.uniform(0.1, 0.9, (200, 2)), np.full(200, 1e-4)])
    found = interpolate_cloud(cloud, smooth(cloud), places)
    assert (found.degree == 0).all()
    assert found.amplification.max() < 12
    assert_allclose(found.values, smooth(places), rtol=0, atol=2e-3)


def test_a_place_off_a_sheet_of_points_takes_the_value_on_it() -> None:
    generator = np.random.default_rng(7)
    sheet = np.column_stack([generator.uniform(0, 1, (500, 2)), np.zeros(500)])
    found = interpolate_cloud(sheet, sheet[:, :1] + 7.0, np.array([[0.4, 0.5, 0.02]]), reach=1.0)
    assert found.degree[0] == 0
    assert_allclose(found.values[0], 7.4, rtol=0, atol=1e-10)


# --- factors -------------------------------------------------------------------------------------------------------


def test_factors_sum_to_one_and_bound_the_noise() -> None:
    generator = np.random.default_rng(8)
    offsets = generator.uniform(-1, 1, (50, 40, 3))
    found = shape_factors(offsets, np.ones((50, 40)), 2)
    assert_allclose(found.factors.sum(axis=1), 1.0, rtol=0, atol=1e-13)
    assert_allclose(np.einsum("pk,pkc->pc", found.factors, offsets), 0.0, rtol=0, atol=1e-13)
    assert_allclose(found.amplification, np.abs(found.factors).sum(axis=1), rtol=1e-15)
    assert (found.amplification >= 1).all()


def test_a_neighbour_of_no_weight_does_not_count() -> None:
    generator = np.random.default_rng(9)
    offsets, weights = generator.uniform(-1, 1, (1, 30, 3)), np.ones((1, 30))
    weights[0, 4] = 0.0
    assert shape_factors(offsets, weights, 1).factors[0, 4] == 0.0
    none = shape_factors(offsets, np.zeros((1, 30)), 2)
    assert none.misfit[0] >= 1.0


def test_the_weight_falls_from_one_to_zero() -> None:
    assert_allclose(compact_weight(np.array([0.0, 0.5, 1.0, 2.0])), [1.0, 3 / 16, 0.0, 0.0], rtol=1e-15)


# --- reach ---------------------------------------------------------------------------------------------------------


def test_places_beyond_the_points_are_refused() -> None:
    generator = np.random.default_rng(10)
    cloud = generator.uniform(0, 1, (5000, 3))
    places = np.concatenate([generator.uniform(0, 1, (98, 3)), [[0.5, 0.5, 1.4], [0.5, 0.5, 1.5]]])
    message = r"2 of 100 places are farther .* at \(0.5, 0.5, 1.5\) m, is 0.5\d* m .* 3 times their spacing there"
    with pytest.raises(FieldError, match=message):
        interpolate_cloud(cloud, smooth(cloud), places)
    assert interpolate_cloud(cloud, smooth(cloud), places, reach=0.6).distance.max() > 0.5
    with pytest.raises(FieldError, match=r"of 100 places .*reach 0.02 m, given\)"):
        interpolate_cloud(cloud, smooth(cloud), places, reach=0.02)


@pytest.mark.parametrize("first", [1e-6, 1e-3])
def test_the_wall_between_the_rows_of_a_layer_is_within_reach(first: float) -> None:
    cloud, _ = wall_layer(first)
    generator = np.random.default_rng(11)
    places = np.column_stack([generator.uniform(0.05, 0.95, (500, 2)), np.zeros(500)])
    assert interpolate_cloud(cloud, cloud, places).distance.max() < 0.1


def test_too_few_neighbours_are_refused() -> None:
    with pytest.raises(FieldError, match=r"5 neighbours are asked for. A quadratic needs 10"):
        interpolate_cloud(np.eye(3), np.eye(3), np.eye(3), neighbours=5)


# --- the error to expect -------------------------------------------------------------------------------------------


@pytest.mark.parametrize("count", [1000, 20000])
@pytest.mark.parametrize("where", ["within", "rim", "outside"])
def test_leave_out_brackets_the_true_error(count: int, where: str) -> None:
    generator = np.random.default_rng(12)
    cloud, places = generator.uniform(0, 1, (count, 3)), generator.uniform(0, 1, (4000, 3))
    if where != "within":  # outside: half a spacing off, as a wall lies off the centres of cells
        places[:, 0] = 0.0 if where == "rim" else -0.5 * count ** (-1 / 3)
    index = index_cloud(cloud)
    found = interpolate_cloud(index, smooth(cloud), places)
    told = leave_out_error(index, {"a": smooth(cloud)[:, 0], "b": smooth(cloud)[:, 1]}, like=found)
    for k, name in enumerate("ab"):
        misses = np.abs(found.values[:, k] - smooth(places)[:, k])
        assert 1 / 3 < told[name].rms / rms(misses) < 3
        assert 1 / 3 < told[name].p95 / np.quantile(misses, 0.95) < 3
        assert (told[name].factor > 1.2) == (where == "outside")
        assert told[name].relative == pytest.approx(told[name].rms / np.ptp(smooth(cloud)[:, k]), rel=1e-12)


def test_leave_out_sees_the_gap_between_rows() -> None:
    # constant along each row: the next point of the row tells the value at once, the other rows do not
    cloud, _ = wall_layer(1e-4)
    index = index_cloud(cloud)
    generator = np.random.default_rng(13)
    places = np.column_stack([generator.uniform(0.1, 0.9, (1000, 2)), np.zeros(1000)])
    values = np.sin(25 * cloud[:, :1])
    found = interpolate_cloud(index, values, places)
    true = rms(found.values[:, 0] - np.sin(25 * places[:, 0]))
    near_wall = np.abs(cloud[found.nearest, 2]) < 1e-2
    assert near_wall.all()
    told = leave_out_error(index, {"a": values[:, 0]}, like=found)["a"]
    assert 1 / 3 < told.rms / true < 6
    blind = interpolate_cloud(index, values, cloud[found.nearest], reach=np.inf, hole=np.zeros(1000))
    assert rms((blind.values - values[found.nearest])[:, 0]) < 0.5 * told.rms


def test_leave_out_of_a_linear_vector_is_rounding() -> None:
    cloud = np.random.default_rng(14).uniform(0, 1, (400, 3))
    told = leave_out_error(index_cloud(cloud), {"velocity": cloud * 30 + 1, "constant": np.full(400, 5.0)})
    assert told["velocity"].rms < 1e-12
    assert told["constant"].relative == 0.0
    assert told["velocity"].count == 100


def test_leave_out_of_noise_is_its_size() -> None:
    generator = np.random.default_rng(15)
    cloud, noise = generator.uniform(0, 1, (20000, 3)), generator.normal(0, 2.0, 20000)
    told = leave_out_error(index_cloud(cloud), {"a": noise})["a"]
    # the noise of the point itself, and what the fit to some 20 others keeps of theirs
    assert 2.0 < told.rms < 3.5
    assert told.p95 / told.rms == pytest.approx(1.96, rel=0.07)  # normal distribution, 1000 draws
    assert told.count == 1000


def test_leave_out_is_the_same_at_every_call() -> None:
    cloud = np.random.default_rng(16).uniform(0, 1, (3000, 3))
    index, fields = index_cloud(cloud), {"a": smooth(cloud)[:, 0]}
    assert leave_out_error(index, fields) == leave_out_error(index, fields)
    assert leave_out_error(index, fields) != leave_out_error(index, fields, seed=1)
    assert leave_out_error(index, fields, share=0.1)["a"].count == 300


def test_a_point_left_out_is_not_used() -> None:
    cloud = np.random.default_rng(17).uniform(0, 1, (500, 3))
    spike = np.zeros((500, 1))
    spike[123] = 1e6
    assert interpolate_cloud(cloud, spike, cloud[123:124], hole=np.zeros(1)).values[0, 0] == 0.0
    assert interpolate_cloud(cloud, spike, cloud[123:124]).values[0, 0] > 1e5


# --- a cloud sampled -----------------------------------------------------------------------------------------------


def cloud_of(places: np.ndarray, **columns: np.ndarray) -> PointCloud:
    return PointCloud("cloud.csv", places, {name: np.asarray(values, float) for name, values in columns.items()})


def test_a_cloud_in_millimetres_is_sampled_in_metres() -> None:
    generator = np.random.default_rng(18)
    points = generator.uniform(0, 1, (4000, 3))
    speed = points @ [[1, 0, 2], [0, 3, 0], [1, 1, 0]]
    cloud = cloud_of(points * 1000, u=speed[:, 0], v=speed[:, 1], w=speed[:, 2], U=speed, p=smooth(points)[:, 0])
    places = generator.uniform(0, 1, (300, 3))
    names = {"velocity": ("u", "v", "w"), "same": "U", "pressure": "p"}
    found = sample_cloud(cloud, names, places, scale=1e-3)
    assert_allclose(found.values["velocity"], places @ [[1, 0, 2], [0, 3, 0], [1, 1, 0]], rtol=0, atol=1e-12)
    assert_allclose(found.values["same"], found.values["velocity"], rtol=0, atol=1e-12)
    assert found.values["pressure"].shape == (300,)
    assert rms(found.values["pressure"] - smooth(places)[:, 0]) < 2e-3
    assert set(found.leave_out) == set(names)
    assert found.leave_out["velocity"].rms < 1e-12 < found.leave_out["pressure"].rms
    assert (found.degree == 2).all()
    assert found.merged == 0
    assert 0 < found.distance.max() < 0.2


def test_a_wrong_unit_shows_in_the_extents() -> None:
    points = np.random.default_rng(19).uniform(0, 1, (500, 3))
    cloud = cloud_of(points * 1000, p=points[:, 0])
    with pytest.raises(
        FieldError, match=r"^cloud.csv: the points are .* m apart, where the places extend over 1.\d* m"
    ):
        sample_cloud(cloud, {"pressure": "p"}, points[:50])
    with pytest.raises(
        FieldError, match=r"^cloud.csv: 50 of 50 places .* points extend over 1\d\d\d m, the places over 1"
    ) as caught:
        sample_cloud(cloud, {"pressure": "p"}, points[:50] - 2000)
    assert "length unit" in caught.value.remedy


def test_points_with_the_same_values_are_merged() -> None:
    points = np.random.default_rng(20).uniform(0, 1, (500, 3))
    twice = np.concatenate([points, points[:40]])
    values = np.concatenate([points[:, 0], points[:40, 0] * (1 + 1e-8)])
    found = sample_cloud(cloud_of(twice, p=values), {"pressure": "p"}, points[:60])
    assert found.merged == 40
    assert_allclose(found.values["pressure"], points[:60, 0], rtol=0, atol=1e-9)
    kept, rows = distinct_points(twice, {"p": values}, "cloud.csv")
    assert rows.tolist() == list(range(500))
    assert_allclose(kept, points, rtol=0, atol=0)


def test_points_with_different_values_are_refused() -> None:
    points = np.random.default_rng(21).uniform(0, 1, (500, 3))
    points[7] = [0.25, 0.5, -0.125]
    twice = np.concatenate([points, points[[7, 9, 11]]])
    values = np.concatenate([points[:, 0], [3.5, points[9, 0], -1.0]])
    message = r"^cloud.csv: 2 of 503 points stand at the place of another and carry a different pressure"
    with pytest.raises(FieldError, match=message) as caught:
        sample_cloud(cloud_of(twice, p=values, id=np.arange(503)), {"pressure": "p"}, points[:5])
    assert "the first at (0.25, 0.5, -0.125) m: 0.25 and 3.5" in str(caught.value)
    # a column that nobody asked for may differ
    sample_cloud(cloud_of(twice, q=np.ones(503), p=values), {"other": "q"}, points[:5])


def test_columns_must_fit() -> None:
    cloud = cloud_of(np.random.default_rng(22).uniform(0, 1, (50, 3)), pressure=np.ones(50), U=np.ones((50, 3)))
    with pytest.raises(FieldError, match=r'no column "Pressure".*Did you mean "pressure"\?.*"pressure", "U"'):
        sample_cloud(cloud, {"pressure": "Pressure"}, cloud.places)
    with pytest.raises(FieldError, match=r"column 'U' has 3 components"):
        sample_cloud(cloud, {"velocity": ("U", "pressure", "pressure")}, cloud.places)
