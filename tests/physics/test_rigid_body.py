"""Rigid bodies, orientations and weighing."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from hypothesis.extra import numpy as arrays

from detune.physics.orientation import axes_from_direction, rotation_about, six_axis_rotation
from detune.physics.rigid_body import (
    attachment,
    box_inertia,
    combine,
    cylinder_inertia,
    inertia_is_possible,
    mass_matrix,
    principal_moments,
    rotate_inertia,
    skew,
    weighed_mass_and_centre,
)

vectors = arrays.arrays(float, 3, elements=st.floats(-3, 3))
quick = settings(deadline=None, max_examples=40)


class TestSkewAndAttachment:
    def test_skew_of_unit_vectors(self):
        # x cross y = z, and so on.
        assert np.array_equal(skew([1, 0, 0]) @ [0, 1, 0], [0, 0, 1])
        assert np.array_equal(skew([0, 0, 1]) @ [1, 0, 0], [0, 1, 0])

    @quick
    @given(vectors, vectors)
    def test_skew_is_the_cross_product(self, r, v):
        np.testing.assert_allclose(skew(r) @ v, np.cross(r, v), atol=1e-12)

    def test_point_moves_by_translation_plus_rotation(self):
        # A point 2 m ahead under 0.01 rad pitch (right-handed about y) goes down 20 mm.
        b = attachment([2.0, 0.0, 0.0])
        np.testing.assert_allclose(b @ [0, 0, 0, 0, 0.01, 0], [0, 0, -0.02])
        np.testing.assert_allclose(b @ [0.1, 0.2, 0.3, 0, 0, 0], [0.1, 0.2, 0.3])

    def test_local_axes(self):
        # Local axial direction along global x: the third row is the motion along x.
        axes = axes_from_direction([1.0, 0.0, 0.0], [0.0, 0.0, 1.0])
        np.testing.assert_allclose(
            attachment([0, 0, 0.5], axes) @ [1, 0, 0, 0, 0.2, 0], [0, 0, 1.1], atol=1e-15
        )

    def test_batches(self):
        r = np.arange(24.0).reshape(2, 4, 3)
        assert attachment(r).shape == (2, 4, 3, 6)
        np.testing.assert_array_equal(attachment(r)[1, 2], attachment(r[1, 2]))


class TestMassMatrix:
    def test_parallel_axis(self):
        # 10 kg, 0.5 m above the reference: J + m d^2 about x and y, J alone about z.
        m = mass_matrix(10.0, [0, 0, 0.5], np.diag([1.0, 2.0, 3.0]))
        np.testing.assert_allclose(np.diag(m), [10, 10, 10, 3.5, 4.5, 3.0])
        # Pitching by +1 rad/s carries the raised centre along +x at 0.5 m/s: momentum 5 kg m/s.
        assert m[0, 4] == pytest.approx(5.0)
        assert m[1, 3] == pytest.approx(-5.0)

    @quick
    @given(vectors, vectors, vectors)
    def test_kinetic_energy(self, offset, velocity, spin):
        inertia = box_inertia(7.0, [0.4, 0.5, 0.6])
        m = mass_matrix(7.0, offset, inertia)
        twist = np.concatenate([velocity, spin])
        at_centre = velocity + np.cross(spin, offset)
        energy = 0.5 * 7.0 * at_centre @ at_centre + 0.5 * spin @ inertia @ spin
        assert 0.5 * twist @ m @ twist == pytest.approx(energy, rel=1e-9, abs=1e-9)
        np.testing.assert_allclose(m, m.T, atol=1e-12)

    def test_batches(self):
        offsets = np.arange(12.0).reshape(4, 3) / 10
        batch = mass_matrix(np.arange(1.0, 5.0), offsets, np.eye(3))
        assert batch.shape == (4, 6, 6)
        np.testing.assert_array_equal(batch[2], mass_matrix(3.0, offsets[2], np.eye(3)))


class TestInertia:
    def test_box(self):
        # m/12 (b^2 + c^2): 12 kg, 1 x 2 x 3 m. Any text on mechanics.
        np.testing.assert_allclose(box_inertia(12.0, [1, 2, 3]), np.diag([13.0, 10.0, 5.0]))

    def test_cylinder(self):
        # m R^2/2 and m (3 R^2 + L^2)/12: 12 kg, R 1 m, L 3 m.
        np.testing.assert_allclose(cylinder_inertia(12.0, 1.0, 3.0, 2), np.diag([12.0, 12.0, 6.0]))
        np.testing.assert_allclose(cylinder_inertia(12.0, 1.0, 3.0, 0), np.diag([6.0, 12.0, 12.0]))
        with pytest.raises(ValueError, match="axis"):
            cylinder_inertia(1.0, 1.0, 1.0, 3)

    def test_two_halves_make_the_whole_box(self):
        mass, centre, inertia = combine(
            [6.0, 6.0], [[1.0, 0.5, 0], [1.0, -0.5, 0]], [box_inertia(6.0, [1, 1, 3])] * 2
        )
        assert mass == 12.0
        np.testing.assert_allclose(centre, [1.0, 0, 0])
        np.testing.assert_allclose(inertia, box_inertia(12.0, [1, 2, 3]))

    def test_nothing_to_combine(self):
        with pytest.raises(ValueError, match="mass"):
            combine([0.0], [[0, 0, 0]], [np.zeros((3, 3))])

    @quick
    @given(vectors, vectors)
    def test_combining_agrees_with_adding_mass_matrices(self, first, second):
        parts = [
            (3.0, first, box_inertia(3.0, [0.2, 0.3, 0.5])),
            (5.0, second, cylinder_inertia(5.0, 0.2, 0.7, 1)),
        ]
        mass, centre, inertia = combine(*zip(*parts, strict=True))
        total = sum(mass_matrix(*part) for part in parts)
        np.testing.assert_allclose(mass_matrix(mass, centre, inertia), total, atol=1e-10)

    def test_rotation(self):
        # A quarter turn about z swaps the moments about x and y.
        turned = rotate_inertia(np.diag([1.0, 2.0, 3.0]), rotation_about([0, 0, 1], np.pi / 2))
        np.testing.assert_allclose(turned, np.diag([2.0, 1.0, 3.0]), atol=1e-15)
        np.testing.assert_allclose(principal_moments(turned), [1, 2, 3])

    def test_possible(self):
        assert inertia_is_possible(np.diag([1.0, 2.0, 3.0]))  # a flat plate: exactly on the limit
        assert not inertia_is_possible(np.diag([1.0, 2.0, 3.1]))  # no body has this
        assert not inertia_is_possible(np.diag([-1.0, 2.0, 2.0]))
        assert not inertia_is_possible([[2, 0.1, 0], [0, 2, 0], [0, 0, 2]])
        assert not inertia_is_possible(np.full((3, 3), np.nan))
        assert not inertia_is_possible(np.eye(2))

    @quick
    @given(arrays.arrays(float, (5, 3), elements=st.floats(-2, 2)))
    def test_any_set_of_masses_has_a_possible_inertia(self, points):
        points = points + np.arange(15.0).reshape(5, 3) ** 2 / 50
        _, _, inertia = combine(np.ones(5), points, np.zeros((5, 3, 3)))
        assert inertia_is_possible(inertia)


class TestWeighing:
    def test_four_corners(self):
        # 100 + 200 + 300 + 400 N on a 2 m x 1 m frame: 1000 N, x = 2 * 600 / 1000 m, y = 1 * 700 / 1000 m.
        corners = [[0, 0], [2, 0], [0, 1], [2, 1]]
        mass, x, y = weighed_mass_and_centre(corners, [100.0, 200.0, 300.0, 400.0])
        assert mass == pytest.approx(1000.0 / 9.80665, rel=1e-12)
        assert (x, y) == (pytest.approx(1.2), pytest.approx(0.7))

    def test_height_is_not_used(self):
        flat = weighed_mass_and_centre([[0, 0], [2, 1]], [100.0, 50.0])
        assert weighed_mass_and_centre([[0, 0, 5], [2, 1, -3]], [100.0, 50.0]) == flat

    def test_faults(self):
        with pytest.raises(ValueError, match="one reaction"):
            weighed_mass_and_centre([[0, 0], [1, 0]], [1.0])
        with pytest.raises(ValueError, match="positive"):
            weighed_mass_and_centre([[0, 0], [1, 0]], [1.0, -1.0])


class TestOrientation:
    def test_a_vertical_component_keeps_the_global_axes(self):
        np.testing.assert_array_equal(axes_from_direction([0, 0, 5.0]), np.eye(3))

    def test_inclined_by_45_degrees(self):
        axes = axes_from_direction([1, 0, 1])
        s = np.sqrt(0.5)
        np.testing.assert_allclose(axes, [[s, 0, s], [0, 1, 0], [-s, 0, s]], atol=1e-15)

    def test_axial_along_x_takes_y_as_radial(self):
        np.testing.assert_allclose(axes_from_direction([1, 0, 0])[:, 0], [0, 1, 0])

    @quick
    @given(vectors, vectors)
    def test_right_handed_and_orthonormal(self, axial, radial):
        if np.linalg.norm(np.cross(axial, radial)) < 1e-3 * (
            1e-3 + np.linalg.norm(axial) * np.linalg.norm(radial)
        ):
            return
        if min(np.linalg.norm(axial), np.linalg.norm(radial)) < 1e-3:
            return
        axes = axes_from_direction(axial, radial)
        np.testing.assert_allclose(axes.T @ axes, np.eye(3), atol=1e-12)
        assert np.linalg.det(axes) == pytest.approx(1.0)
        np.testing.assert_allclose(axes[:, 2], axial / np.linalg.norm(axial), atol=1e-12)
        assert axes[:, 0] @ radial > 0
        np.testing.assert_allclose(axes[:, 1] @ radial, 0.0, atol=1e-9)

    @pytest.mark.parametrize(
        ("axial", "radial"),
        [([0, 0, 0], None), ([0, 0, 1], [0, 0, -2]), ([np.nan, 0, 1], None), ([0, 0, 1], [0, 0, 0])],
    )
    def test_undecided_directions(self, axial, radial):
        with pytest.raises(ValueError, match="direction"):
            axes_from_direction(axial, radial)

    def test_very_long_and_short_vectors(self):
        np.testing.assert_array_equal(axes_from_direction([0, 0, 1e-300], [1e300, 0, 0]), np.eye(3))

    def test_six_axes_turn_as_three_and_three(self):
        turn = rotation_about([1, 2, 3], 0.7)
        six = six_axis_rotation(turn)
        np.testing.assert_allclose(six[:3, :3], turn)
        np.testing.assert_allclose(six[3:, 3:], turn)
        assert not six[:3, 3:].any()
        assert not six[3:, :3].any()
