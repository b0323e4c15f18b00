"""Kinematics and dynamics against published examples and closed forms."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from builders import (
    FER_READY_RAD,
    ROBOTS,
    WEIGHTLESS,
    WORKING,
    Body,
    cell_text,
    chain_arm,
    fer_cell,
    load_text,
    planar_point_masses,
    robot_cell,
    screw,
    screw_bodies,
    standard_dh,
    turn,
)

from reach.arm import FRICTION_WIDTH_RAD_S, Arm
from reach.cell import Joint, JointLimits, Paddle, Part, Pose
from reach.kinematics import Chain
from reach.paddle import paddle_mass, symmetric

HALF_DIGIT = 5e-5  # figures printed to four decimals
NEWTON = 1e-9  # N·m, rad·m and the like: rounding of double precision in short sums
X, Y, Z = np.eye(3)


# --- PUMA 560
# Corke & Armstrong-Hélouvry, ICRA 1994, pp 1608-1613, as tabulated in robotics-toolbox-python @a9ed8d4,
# models/DH/Puma560.py; expected values from its tests/test_DHRobot.py where marked T. g = 9.81 m/s².
PUMA_QN = np.array([0, np.pi / 4, np.pi, 0, np.pi / 4, 0])
PUMA_ARMATURE = np.array([-62.6111, 107.815, -53.7063, 76.0364, 71.923, 76.686]) ** 2 * np.repeat(
    [200e-6, 33e-6], 3
)


def puma(armature: bool = True) -> Arm:
    """The PUMA 560, standard Denavit-Hartenberg, base of the toolbox's edition."""
    bodies, offset, rotation = standard_dh(
        d=(0.67183, 0, 0.15005, 0.4318, 0, 0),
        a=(0, 0.4318, 0.0203, 0, 0, 0),
        alpha=(np.pi / 2, 0, -np.pi / 2, np.pi / 2, -np.pi / 2, 0),
        mass_kg=(0, 17.4, 4.8, 0.82, 0.34, 0.09),
        com=(
            (0, 0, 0),
            (-0.3638, 0.006, 0.2275),
            (-0.0203, -0.0141, 0.070),
            (0, 0.019, 0),
            (0, 0, 0),
            (0, 0, 0.032),
        ),
        moments=(
            (0, 0.35, 0),
            (0.13, 0.524, 0.539),
            (0.066, 0.086, 0.0125),
            (1.8e-3, 1.3e-3, 1.8e-3),
            (0.3e-3, 0.4e-3, 0.3e-3),
            (0.15e-3, 0.15e-3, 0.04e-3),
        ),
    )
    limits = [JointLimits(armature=float(value) if armature else 0.0) for value in PUMA_ARMATURE]
    return Arm(chain_arm(bodies, offset, rotation, limits, (0.0, 0.0, -9.81)), WEIGHTLESS)


@pytest.mark.parametrize(
    ("posture", "expected"),
    [
        pytest.param(PUMA_QN, (0, 31.6399, 6.0351, 0, 0.0283, 0), id="qn"),  # T
        # The other three were recomputed with another dynamics library; qr and qs also in Corke's book (from memory).
        pytest.param((0, 0, 0, 0, 0, 0), (0, 37.4837, 0.2489, 0, 0, 0), id="qz"),
        pytest.param((0, np.pi / 2, -np.pi / 2, 0, 0, 0), (0, -0.7752, 0.2489, 0, 0, 0), id="qr"),
        pytest.param((0, 0, -np.pi / 2, 0, 0, 0), (0, 46.0069, 8.7722, 0, 0.0283, 0), id="qs"),
    ],
)
def test_puma_gravity_torque(posture, expected):
    np.testing.assert_allclose(puma().static_torque(np.array(posture)), expected, atol=HALF_DIGIT)


def test_puma_mass_matrix_with_reflected_inertia():
    expected = np.diag([3.6594, 4.4137, 0.9378, 0.1925, 0.1713, 0.1941])  # T
    expected[0, 1:4] = -0.4044, 0.1006, -0.0025
    expected[1, 2:5] = 0.3509, 0, 0.0024
    expected[2, 4] = 0.0015
    expected += np.triu(expected, 1).T
    mass = puma().at(PUMA_QN, np.zeros(6)).mass
    np.testing.assert_allclose(mass, expected, atol=HALF_DIGIT)
    np.testing.assert_allclose(mass, mass.T, atol=NEWTON)


def test_puma_task_inertia():
    state = puma().at(PUMA_QN, np.zeros(6))
    inverse = state.jacobian @ np.linalg.solve(state.mass, state.jacobian.T)
    expected = (17.2954, 12.1909, 13.3348, 0.1941, 0.1713, 0.5791)  # T
    np.testing.assert_allclose(np.diag(np.linalg.inv(inverse)), expected, atol=HALF_DIGIT)


@pytest.mark.parametrize(
    ("armature", "expected"), [(True, (8.7251, 10.1326, 6.8558)), (False, (2.9788, 7.5913, 3.4049))]
)
def test_puma_directional_mass(armature, expected):
    # Formula 1/(nᵀ J M⁻¹ Jᵀ n): Khatib 1987; values recomputed with another dynamics library.
    state = puma(armature).at(PUMA_QN, np.zeros(6))
    rows = state.jacobian[:3]
    inverse = rows @ np.linalg.solve(state.mass, rows.T)
    np.testing.assert_allclose(1 / np.diag(inverse), expected, atol=HALF_DIGIT)


# --- Lynch & Park, Modern Robotics: the three-link example
# NxRLab/ModernRobotics @cbd41fd, core.py, docstrings of InverseDynamics, MassMatrix and their neighbours. g = 9.8 m/s².
# The first screw (1, 0, 1, 0, 1, 0) is no unit screw: |ω| = √2, so that joint's values are scaled by √2.
MR_SCALE = np.array([np.sqrt(2), 1.0, 1.0])
MR_Q, MR_V, MR_A = (MR_SCALE * x for x in ((0.1, 0.1, 0.1), (0.1, 0.2, 0.3), (2, 1.5, 1)))
MR_MASS = np.array(
    [
        [22.5433380, -0.307146754, -0.00718426391],
        [-0.307146754, 1.96850717, 0.432157368],
        [-0.00718426391, 0.432157368, 0.191630858],
    ]
)
MR_COUPLING, MR_GRAVITY = (0.26453118, -0.05505157, -0.00689132), (28.40331262, -37.64094817, -5.4415892)
MR_TIP_FORCE, MR_TORQUE = (1.40954608, 1.85771497, 1.392409), (74.69616155, -33.06766016, -3.23057314)
MR_DIGITS = {"rtol": 1e-7, "atol": 5e-9}  # printed to eight decimals or nine digits


def modern_robotics_3() -> Arm:
    """The book's arm; each link's centre of mass is in its link frame."""
    upright = np.array([[0.0, 0, 1], [0, 1, 0], [-1, 0, 0]])
    frames = [(np.eye(3), np.array([0, 0, 0.089159]))]
    for rotation, offset in (
        (upright, (0.28, 0.13585, 0)),
        (np.eye(3), (0, -0.1197, 0.395)),
        (np.eye(3), (0, 0, 0.14225)),
    ):
        axes, origin = frames[-1]
        frames.append((axes @ rotation, origin + axes @ np.array(offset)))
    masses = (3.7, 8.393, 2.275)
    moments = ((0.010267, 0.010267, 0.00666), (0.22689, 0.22689, 0.0151074), (0.0494433, 0.0494433, 0.004095))
    screws = (((1, 0, 1), (0, 1, 0)), ((0, 1, 0), (-0.089, 0, 0)), ((0, 1, 0), (-0.089, 0, 0.425)))
    before, bodies = np.zeros(3), []
    for (omega, v), (axes, origin), mass, moment in zip(screws, frames, masses, moments, strict=False):
        axis, point, _ = screw(omega, v)
        bodies.append(Body(point - before, axis, mass, origin - point, np.diag(moment), np.eye(3), axes))
        before = point
    axes, origin = frames[-1]
    return Arm(chain_arm(bodies, origin - before, axes, gravity_m_s2=(0, 0, -9.8)), WEIGHTLESS)


def mr_tip_torque(arm: Arm) -> np.ndarray:
    """Joint torques that give moment (1, 1, 1) and force (1, 1, 1) in the tip's own axes."""
    _, axes, jacobian = arm.jacobian(MR_Q)
    wrench = np.concatenate([axes @ np.ones(3), axes @ np.ones(3)])
    return np.asarray(MR_SCALE * (jacobian.T @ wrench))


def test_three_link_mass_matrix():
    mass = modern_robotics_3().at(MR_Q, MR_V).mass
    np.testing.assert_allclose(MR_SCALE[:, None] * mass * MR_SCALE, MR_MASS, **MR_DIGITS)


def test_three_link_bias_splits_into_coupling_and_gravity():
    arm = modern_robotics_3()
    gravity = arm.static_torque(MR_Q)
    np.testing.assert_allclose(MR_SCALE * gravity, MR_GRAVITY, **MR_DIGITS)
    np.testing.assert_allclose(MR_SCALE * (arm.at(MR_Q, MR_V).bias - gravity), MR_COUPLING, **MR_DIGITS)


def test_three_link_tip_force_and_whole_torque():
    arm = modern_robotics_3()
    tip = mr_tip_torque(arm)
    np.testing.assert_allclose(tip, MR_TIP_FORCE, **MR_DIGITS)
    torque = MR_SCALE * arm.torque(MR_Q[None], MR_V[None], MR_A[None])[0]
    np.testing.assert_allclose(torque + tip, MR_TORQUE, **MR_DIGITS)


def test_three_link_forward_dynamics():
    arm = modern_robotics_3()
    state = arm.at(MR_Q, MR_V)
    left = np.array([0.5, 0.6, 0.7]) - mr_tip_torque(arm) - MR_SCALE * state.bias
    answer = np.linalg.solve(MR_SCALE[:, None] * state.mass * MR_SCALE, left)
    # docstring of ForwardDynamics, same place
    np.testing.assert_allclose(answer, (-0.97392907, 25.58466784, -32.91499212), **MR_DIGITS)


# --- Lynch & Park, Modern Robotics, examples 4.5 and 4.7: link data in public ports, results from memory
def test_ur5_example_4_5():
    w1, w2, l1, l2, h1, h2 = 0.109, 0.082, 0.425, 0.392, 0.089, 0.095
    screws = (
        ((0, 0, 1), (0, 0, 0)),
        ((0, 1, 0), (-h1, 0, 0)),
        ((0, 1, 0), (-h1, 0, l1)),
        ((0, 1, 0), (-h1, 0, l1 + l2)),
        ((0, 0, -1), (-w1, l1 + l2, 0)),
        ((0, 1, 0), (h2 - h1, 0, l1 + l2)),
    )
    axes = [screw(*s)[:2] for s in screws]
    home = np.array([[-1.0, 0, 0], [0, 0, 1], [0, 1, 0]])
    tip = np.array([l1 + l2, w1 + w2, h1 - h2]) - axes[-1][1]
    arm = Arm(chain_arm(screw_bodies(axes), tip, home), WEIGHTLESS)
    position, rotation = arm.pose(np.array([0, -np.pi / 2, 0, 0, np.pi / 2, 0]))
    np.testing.assert_allclose(position, (0.095, 0.109, 0.988), atol=NEWTON)
    np.testing.assert_allclose(rotation, [[0, -1, 0], [1, 0, 0], [0, 0, 1]], atol=NEWTON)


def test_wam_example_4_7():
    l1, l2, l3, w1 = 0.55, 0.3, 0.06, 0.045
    body_screws = (
        ((0, 0, 1), (0, 0, 0)),
        ((0, 1, 0), (l1 + l2 + l3, 0, 0)),
        ((0, 0, 1), (0, 0, 0)),
        ((0, 1, 0), (l2 + l3, 0, w1)),
        ((0, 0, 1), (0, 0, 0)),
        ((0, 1, 0), (l3, 0, 0)),
        ((0, 0, 1), (0, 0, 0)),
    )
    tip = np.array([0, 0, l1 + l2 + l3])
    axes = [(axis, point + tip) for axis, point, _ in (screw(*s) for s in body_screws)]
    arm = Arm(chain_arm(screw_bodies(axes), tip - axes[-1][1]), WEIGHTLESS)
    position, rotation = arm.pose(np.array([0, np.pi / 4, 0, -np.pi / 4, 0, -np.pi / 2, 0]))
    np.testing.assert_allclose(position, (0.315729, 0, 0.657089), atol=5e-7)  # printed to six decimals
    np.testing.assert_allclose(rotation, [[0, 0, -1], [0, 1, 0], [1, 0, 0]], atol=NEWTON)


# --- Two links in a plane: closed forms
@pytest.mark.parametrize(
    ("q", "v", "a", "expected"),
    [
        # Craig, Introduction to Robotics, 3rd ed., eq. 6.58 (from memory); l = m = 1, g = 9.81; values recomputed.
        pytest.param((0.3, 0.5), (1, 2), (3, 4), (43.518816, 16.946866), id="moving"),
        pytest.param((0, 0), (0, 0), (0, 0), (29.43, 9.81), id="stretched"),
        pytest.param((0, np.pi / 2), (0, 0), (0, 0), (19.62, 0), id="elbow-up"),
    ],
)
def test_point_mass_two_link_torque(q, v, a, expected):
    arm = Arm(planar_point_masses((1, 1), (1, 1)), WEIGHTLESS)
    torque = arm.torque(*(np.array([x], dtype=float) for x in (q, v, a)))[0]
    np.testing.assert_allclose(torque, expected, atol=5e-7)  # to six decimals


def test_point_mass_two_link_at_right_angle():
    # Lynch & Park, ch. 8 (from memory): M, J, task inertia and the mass that each direction feels.
    state = Arm(planar_point_masses((1, 1), (1, 1)), WEIGHTLESS).at(np.array([0, np.pi / 2]), np.zeros(2))
    np.testing.assert_allclose(state.mass, [[3, 1], [1, 1]], atol=NEWTON)
    rows = state.jacobian[:2]
    np.testing.assert_allclose(rows, [[-1, -1], [1, 0]], atol=NEWTON)
    inverse = rows @ np.linalg.solve(state.mass, rows.T)
    np.testing.assert_allclose(np.linalg.inv(inverse), np.diag([1.0, 2.0]), atol=NEWTON)
    np.testing.assert_allclose(1 / np.diag(inverse), (1, 2), atol=NEWTON)


def test_manipulability_of_two_links():
    # Yoshikawa, IJRR 4(2) 1985: w = √det(J Jᵀ) = l1 l2 |sin q2| (from memory).
    arm = Arm(planar_point_masses((0.7, 0.4), (1, 1)), WEIGHTLESS)
    for elbow in np.linspace(-np.pi, np.pi, 13):
        rows = arm.jacobian(np.array([0.3, elbow]))[2][:2]
        w = np.sqrt(max(np.linalg.det(rows @ rows.T), 0.0))
        assert w == pytest.approx(0.7 * 0.4 * abs(np.sin(elbow)), abs=1e-8)  # √ of a rounding of 1e-17


DISC_TOML = """
[paddle]
mount = { xyz_m = [0.03, 0.0, 0.05], rpy_deg = [0.0, 0.0, 0.0] }
shape = "disc"
radius_m = 0.08
thickness_m = 0.02
mass_kg = 0.3
"""


def link2_closed_form(q, v, a, mass, centre, inertia):
    """Torques of robots/link2 by the textbook two-link formulas, link 2 with its paddle as one body.

    mass, centre (x, z in link 2), inertia about that centre around the joint axis; friction apart.
    """
    g, l1, m1, r1, i1, armature = 9.80665, 0.5, 2.4, 0.25, 0.05032, (0.05, 0.02)
    x, z = centre
    c2, s2 = np.cos(q[1]), np.sin(q[1])
    # The joint turns about -y: forward is x, and z is the direction that a positive angle moves x to.
    ahead, aside = x * c2 - z * s2, x * s2 + z * c2
    reach = x * x + z * z
    m22 = inertia + mass * reach
    m12 = m22 + mass * l1 * ahead
    m11 = i1 + m1 * r1**2 + m22 + mass * (l1**2 + 2 * l1 * ahead)
    coupling = -mass * l1 * aside * np.array([2 * v[0] * v[1] + v[1] ** 2, -(v[0] ** 2)])
    lever = x * np.cos(q[0] + q[1]) - z * np.sin(q[0] + q[1])
    gravity = g * np.array([(m1 * r1 + mass * l1) * np.cos(q[0]) + mass * lever, mass * lever])
    matrix = np.array([[m11 + armature[0], m12], [m12, m22 + armature[1]]])
    losses = np.array([0.2, 0.1]) * v + np.array([0.4, 0.2]) * np.tanh(np.asarray(v) / FRICTION_WIDTH_RAD_S)
    return matrix, matrix @ a + coupling + gravity + losses


def test_link2_with_disc_against_closed_forms():
    # Two-link formulas as in any textbook of robot dynamics, robots/link2/ORIGIN.md; the disc is added to link 2
    # by the parallel-axis theorem: a solid cylinder's m(3r² + t²)/12 across, its centre t/2 behind its face.
    cell = robot_cell("link2", paddle=DISC_TOML)
    arm = Arm(cell.arm, cell.paddle)
    disc, centre = 0.3, np.array([0.4 + 0.03, 0.05 - 0.01])
    across = disc * (3 * 0.08**2 + 0.02**2) / 12
    mass = 1.2 + disc
    com = (1.2 * np.array([0.2, 0.0]) + disc * centre) / mass
    inertia = 0.01616 + 1.2 * np.sum((com - [0.2, 0]) ** 2) + across + disc * np.sum((centre - com) ** 2)
    rng = np.random.default_rng(1)
    for q, v, a in rng.uniform(-2.0, 2.0, (20, 3, 2)):
        matrix, torque = link2_closed_form(q, v, a, mass, com, inertia)
        state = arm.at(q, v)
        np.testing.assert_allclose(state.mass, matrix, atol=NEWTON)
        np.testing.assert_allclose(arm.torque(q[None], v[None], a[None])[0], torque, atol=NEWTON)
        np.testing.assert_allclose(state.mass @ a + state.bias, torque, atol=NEWTON)


def test_link2_jacobian_closed_form():
    # Derivatives of x = l1 c1 + l2 c12, z = l1 s1 + l2 s12 for the strike point, (0.43, 0.05) in link 2.
    cell = robot_cell("link2", paddle=DISC_TOML)
    arm = Arm(cell.arm, cell.paddle)
    for q1, q2 in np.random.default_rng(2).uniform(-2.0, 2.0, (10, 2)):
        s, c = np.sin(q1 + q2), np.cos(q1 + q2)
        outer = np.array([-0.43 * s - 0.05 * c, 0, 0.43 * c - 0.05 * s, 0, -1, 0])
        inner = outer + np.array([-0.5 * np.sin(q1), 0, 0.5 * np.cos(q1), 0, 0, 0])
        position, _, jacobian = arm.jacobian(np.array([q1, q2]))
        np.testing.assert_allclose(jacobian, np.column_stack([inner, outer]), atol=NEWTON)
        expected = (0.5 * np.cos(q1) + 0.43 * c - 0.05 * s, 0, 0.5 * np.sin(q1) + 0.43 * s + 0.05 * c)
        np.testing.assert_allclose(position, expected, atol=NEWTON)


# --- The paddle as a solid
def solid(points: np.ndarray, mass_kg: float) -> tuple[np.ndarray, np.ndarray]:
    """Centre (3,) and inertia (3, 3) about it of equal small masses at points (k, 3)."""
    centre = points.mean(axis=0)
    r = points - centre
    return centre, mass_kg * (np.eye(3) * np.mean(np.sum(r**2, axis=1)) - r.T @ r / len(r))


def cells(n: int) -> np.ndarray:
    """Midpoints of n cells between -1/2 and 1/2."""
    return (np.arange(n) + 0.5) / n - 0.5


def test_disc_against_its_own_solid():
    # Rings of equal area, each at its mean-square radius: exact in r². Layers by the midpoint rule.
    radius, thickness, mass, rings = 0.085, 0.012, 0.25, 20
    square = (np.arange(rings) + 0.5) / rings * radius**2
    layer = thickness * cells(200) - thickness / 2
    s, a, z = (x.ravel() for x in np.meshgrid(square, 2 * np.pi * cells(24), layer, indexing="ij"))
    points = np.column_stack([np.sqrt(s) * np.cos(a), np.sqrt(s) * np.sin(a), z])
    body = paddle_mass(Paddle(Pose(), mass, "disc", radius_m=radius, thickness_m=thickness))
    centre, inertia = solid(points, mass)
    np.testing.assert_allclose(body.com_m, centre, atol=1e-12)
    np.testing.assert_allclose(
        body.inertia_kg_m2, inertia, rtol=1e-5, atol=1e-12
    )  # midpoint rule, 200 layers


def test_plate_against_its_own_solid():
    size, thickness, mass, n = (0.15, 0.20), 0.01, 0.3, 60
    x, y, z = np.meshgrid(cells(n) * size[0], cells(n) * size[1], cells(n) * thickness - thickness / 2)
    body = paddle_mass(Paddle(Pose(), mass, "plate", size_m=size, thickness_m=thickness))
    centre, inertia = solid(np.column_stack([x.ravel(), y.ravel(), z.ravel()]), mass)
    np.testing.assert_allclose(body.com_m, centre, atol=1e-12)
    np.testing.assert_allclose(
        body.inertia_kg_m2, inertia, rtol=3e-4, atol=1e-12
    )  # midpoint rule: 1/n² = 2.8e-4


def test_thin_disc_and_thin_plate_handbook_values():
    # Meriam & Kraige, Engineering Mechanics: Dynamics, table D/4 (from memory): thin disc m r²/2 and m r²/4, thin
    # rectangle m b²/12, m a²/12 and m (a² + b²)/12.
    disc = paddle_mass(Paddle(Pose(), 2.0, "disc", radius_m=0.3)).inertia_kg_m2
    np.testing.assert_allclose(disc, np.diag([0.045, 0.045, 0.09]), atol=1e-15)
    plate = paddle_mass(Paddle(Pose(), 12.0, "plate", size_m=(0.1, 0.2))).inertia_kg_m2
    np.testing.assert_allclose(plate, np.diag([0.04, 0.01, 0.05]), atol=1e-15)


def test_parts_by_parallel_axes():
    # Two points d apart have the reduced mass times d² about their common centre.
    held = Paddle(
        Pose(), 2.0, "given", com_m=(0, 0, 0), inertia_kg_m2=(0.0,) * 6, parts=(Part(3.0, (0.3, 0.0, -0.4)),)
    )
    body = paddle_mass(held)
    assert body.mass_kg == 5.0
    np.testing.assert_allclose(body.com_m, (0.18, 0, -0.24), atol=1e-15)
    d = np.array([0.3, 0.0, -0.4])
    np.testing.assert_allclose(body.inertia_kg_m2, 1.2 * (np.eye(3) * 0.25 - np.outer(d, d)), atol=1e-15)


def test_part_inertia_in_face_axes():
    moments = (0.003, 0.004, 0.005, 0.0002, -0.0003, 0.0004)
    paddle = Paddle(Pose(), 1.0, "given", com_m=(0.0, 0, 0), inertia_kg_m2=(0.01, 0.02, 0.025, 0, 0, 0))
    together = paddle_mass(replace(paddle, parts=(Part(1.0, (0.0, 0.0, 0.0), moments),)))
    expected = symmetric(0.013, 0.024, 0.030, 0.0002, -0.0003, 0.0004)
    np.testing.assert_allclose(together.inertia_kg_m2, expected, atol=1e-15)


# --- A published seven-axis model, read from its URDF
# Franka Emika FER ("Panda"), maker's Denavit-Hartenberg table (frankarobotics/docs @5f28326); positions recomputed.
@pytest.mark.parametrize(
    ("mount", "q", "expected", "digit"),
    [
        pytest.param(0.0, (0.0,) * 7, (0.088, 0, 0.926), 1e-12, id="zero, flange"),
        pytest.param(0.0, FER_READY_RAD, (0.306891, 0, 0.590282), 5e-7, id="ready, flange"),
        pytest.param(0.1034, FER_READY_RAD, (0.306891, 0, 0.486882), 5e-7, id="ready, tool"),
        # robotics-toolbox-python @a9ed8d4, test of its Panda at q = 1 … 7 rad with a tool 0.103 m beyond the flange
        pytest.param(0.103, (1, 2, 3, 4, 5, 6, 7), (0.1372, 0.3246, 0.4436), HALF_DIGIT, id="one to seven"),
    ],
)
def test_fer_forward_kinematics(tmp_path, mount, q, expected, digit):
    cell = fer_cell(tmp_path)
    arm = Arm(cell.arm, replace(cell.paddle, mount=Pose((0.0, 0.0, mount), (0.0, 0.0, -np.pi / 4))))
    np.testing.assert_allclose(arm.pose(np.array(q, dtype=float))[0], expected, atol=digit)


# --- The two kinematics, and derivatives
HANGING = "base = { xyz_m = [0.3, -0.2, 1.9], rpy_deg = [180.0, 20.0, 30.0] }"


def arms(tmp_path):
    """Arms of six and seven axes, upright and hanging."""
    built = {name: robot_cell(name) for name in ("bench7", "bench6", "link2")}
    built["hanging"] = robot_cell("bench7", HANGING)
    built["published"] = fer_cell(tmp_path)
    return {name: Arm(cell.arm, cell.paddle) for name, cell in built.items()}


def test_batched_chain_is_the_arm(tmp_path):
    for arm in arms(tmp_path).values():
        if arm.n == 2:
            continue
        rng = np.random.default_rng(3)
        q, v = rng.uniform(-3, 3, (10_000 if arm.spec.base == Pose() else 500, arm.n)), rng.normal(size=arm.n)
        chain = Chain.of(arm)
        position, rotation, jacobian = chain.jacobians(q)
        twist = chain.twists(q, np.broadcast_to(v, q.shape))[2]
        one = [arm.jacobian(row) for row in q]
        np.testing.assert_allclose(position, [item[0] for item in one], atol=1e-12)
        np.testing.assert_allclose(rotation, [item[1] for item in one], atol=1e-12)
        np.testing.assert_allclose(jacobian, [item[2] for item in one], atol=1e-12)
        np.testing.assert_allclose(twist, jacobian @ v, atol=1e-11)
        np.testing.assert_allclose(arm.pose(q[0])[0], position[0], atol=1e-12)
        np.testing.assert_allclose(arm.pose(q[0])[1], rotation[0], atol=1e-12)


def test_jacobian_and_its_drift_by_differences(tmp_path):
    h = 1e-5  # central differences: error about h² of a third derivative, and 1e-16 / h of rounding
    for arm in arms(tmp_path).values():
        rng = np.random.default_rng(4)
        for _ in range(5):
            q, v = rng.uniform(-2, 2, arm.n), rng.uniform(-2, 2, arm.n)
            state = arm.at(q, v)
            ahead, behind = arm.jacobian(q + h * v), arm.jacobian(q - h * v)
            np.testing.assert_allclose(state.jacobian[:3] @ v, (ahead[0] - behind[0]) / (2 * h), atol=1e-7)
            spin = (ahead[1] - behind[1]) / (2 * h) @ arm.pose(q)[1].T
            turning = np.array([spin[2, 1], spin[0, 2], spin[1, 0]])
            np.testing.assert_allclose(state.jacobian[3:] @ v, turning, atol=1e-7)
            np.testing.assert_allclose(state.drift, (ahead[2] - behind[2]) @ v / (2 * h), atol=1e-6)
            for mine, theirs in zip(arm.twist_terms(q, v), (state.jacobian, state.drift), strict=True):
                np.testing.assert_allclose(mine, theirs, atol=1e-12)


# --- Torque's parts
def test_torque_needs_mass_bias_and_losses():
    cell = robot_cell("bench7")
    arm = Arm(cell.arm, cell.paddle)
    bare = replace(cell.arm, joints=tuple(Joint(j.name, j.kind) for j in cell.arm.joints))
    without = Arm(bare, cell.paddle)
    rng = np.random.default_rng(5)
    q, v, a = rng.uniform(-1, 1, (3, 6, 7))
    known = [joint.limits for joint in cell.arm.joints]
    armature, damping, friction = (
        np.array([getattr(item, name) for item in known]) for name in ("armature", "damping", "friction")
    )
    expected = armature * a + damping * v + friction * np.tanh(v / FRICTION_WIDTH_RAD_S)
    assert np.all(armature > 0) and np.all(damping > 0) and np.all(friction > 0)
    np.testing.assert_allclose(arm.torque(q, v, a) - without.torque(q, v, a), expected, atol=1e-10)
    for row in range(6):
        state = arm.at(q[row], v[row])
        np.testing.assert_allclose(state.mass @ a[row] + state.bias, arm.torque(q, v, a)[row], atol=1e-10)
        np.testing.assert_allclose(
            arm.static_torque(q[row]), without.torque(q, 0 * v, 0 * a)[row], atol=1e-10
        )


def test_gravity_stays_in_the_world_when_the_base_turns():
    cell = robot_cell("bench7")
    tilt = Pose((0.4, 0.1, 1.5), (2.0, -0.4, 0.9))
    rng = np.random.default_rng(6)
    q, v, a = rng.uniform(-1.5, 1.5, (3, 4, 7))
    tilted = Arm(replace(cell.arm, base=tilt), cell.paddle).torque(q, v, a)
    down = tuple(tilt.rotation.T @ np.array(cell.arm.gravity_m_s2))
    np.testing.assert_allclose(
        tilted, Arm(replace(cell.arm, gravity_m_s2=down), cell.paddle).torque(q, v, a), atol=1e-10
    )
    upright = Arm(cell.arm, cell.paddle)
    hanging = Arm(replace(cell.arm, base=Pose((0, 0, 2.0), (np.pi, 0, 0))), cell.paddle)
    np.testing.assert_allclose(hanging.static_torque(q[0]), -upright.static_torque(q[0]), atol=1e-10)
    assert np.abs(upright.static_torque(q[0])).max() > 1.0


# --- What the stand carries
def test_base_load_at_rest_is_the_weight():
    # By hand: the moving bodies of robots/link2 (2.4, 1.2 kg) and the disc (0.3 kg) in posture (0.4, 0.7).
    base = Pose((0.2, 0.3, 0.5), (0.3, -0.2, 0.4))
    cell = robot_cell("link2", paddle=DISC_TOML)
    arm = Arm(replace(cell.arm, base=base), cell.paddle)
    q = np.array([[0.4, 0.7]])
    wrench = arm.base_wrench(q, np.zeros((1, 2)), np.zeros((1, 2)))
    along1 = np.array([np.cos(0.4), 0, np.sin(0.4)])
    along2, across2 = np.array([np.cos(1.1), 0, np.sin(1.1)]), np.array([-np.sin(1.1), 0, np.cos(1.1)])
    places = [
        (2.4, 0.25 * along1),
        (1.2, 0.5 * along1 + 0.2 * along2),
        (0.3, 0.5 * along1 + 0.43 * along2 + 0.04 * across2),
    ]
    up = base.rotation.T @ np.array([0, 0, 9.80665])
    assert arm.masses() == pytest.approx((3.9, 1.5), abs=1e-12)
    np.testing.assert_allclose(wrench[0, :3], 3.9 * up, atol=1e-10)
    np.testing.assert_allclose(wrench[0, 3:], sum(m * np.cross(r, up) for m, r in places), atol=1e-10)


def test_base_load_in_motion_is_momentum_change():
    # Newton and Euler for two points: force Σ m (a - g), moment Σ r × m (a - g), about the base origin.
    base = Pose((0.2, 0.3, 0.5), (0.0, 0.0, 0.6))
    q, v, a = np.array([0.3, 0.5]), np.array([1.0, 2.0]), np.array([3.0, 4.0])
    spec = planar_point_masses((1.0, 0.8), (1.5, 0.7), base=base)
    wrench = Arm(spec, WEIGHTLESS).base_wrench(q[None], v[None], a[None])
    place, acceleration = np.zeros(3), np.zeros(3)
    force, moment = np.zeros(3), np.zeros(3)
    down = base.rotation.T @ np.array([0, -9.81, 0])
    for k, (length, mass) in enumerate(((1.0, 1.5), (0.8, 0.7))):
        angle, speed, gain = q[: k + 1].sum(), v[: k + 1].sum(), a[: k + 1].sum()
        along, across = length * turn(Z, angle)[:, 0], length * turn(Z, angle)[:, 1]
        place, acceleration = place + along, acceleration + gain * across - speed**2 * along
        force = force + mass * (acceleration - down)
        moment = moment + np.cross(place, mass * (acceleration - down))
    np.testing.assert_allclose(wrench[0, :3], force, atol=1e-10)
    np.testing.assert_allclose(wrench[0, 3:], moment, atol=1e-10)


# --- Joints beside the chain
def camera_text(held: float) -> str:
    """bench7 with its tip on link6, so that j7 and the camera bracket are both beside the chain."""
    start = {name: q for name, q in WORKING["bench7"].items() if name != "j7"}
    urdf, limits = ROBOTS / "bench7" / "bench7.urdf", ROBOTS / "bench7" / "bench7.limits.toml"
    arm = f"locked_rad = {{ wrist_cam = {held}, j7 = 0.3 }}"
    return cell_text(urdf, "link6", start, limits, arm)


def test_held_joint_moves_its_mass():
    # Upright, all axes of bench7 lie in x = y = 0 up to link6: j1 sees the bracket (0.12 kg, its inertia in ORIGIN's
    # URDF) at 0.095 + 0.02 cos θ, turned by θ about y.
    def first(held: float) -> float:
        cell = load_text(camera_text(held))
        return float(Arm(cell.arm, WEIGHTLESS).at(np.zeros(6), np.zeros(6)).mass[0, 0])

    def bracket(held: float) -> float:
        c, s = np.cos(held), np.sin(held)
        return float(0.12 * (0.095 + 0.02 * c) ** 2 + 3.125e-05 * s**2 + 4.1e-05 * c**2)

    assert first(0.5) - first(-0.2) == pytest.approx(bracket(0.5) - bracket(-0.2), abs=1e-12)
    assert abs(bracket(0.5) - bracket(-0.2)) > 1e-5


def test_held_joint_is_the_joint_welded_there(tmp_path):
    text = (ROBOTS / "bench7" / "bench7.urdf").read_text(encoding="utf-8")
    welded = text.replace('name="wrist_cam" type="revolute"', 'name="wrist_cam" type="fixed"')
    welded = welded.replace(
        '<origin xyz="0.095 0 0.02" rpy="0 0 0"/>', '<origin xyz="0.095 0 0.02" rpy="0 0.5 0"/>'
    )
    assert welded.count('rpy="0 0.5 0"') == 1 and welded.count('type="fixed"') == 1
    path = tmp_path / "welded.urdf"
    path.write_text(welded, encoding="utf-8")
    limits = ROBOTS / "bench7" / "bench7.limits.toml"
    fixed = load_text(cell_text(path, "flange", WORKING["bench7"], limits))
    held = robot_cell("bench7", "locked_rad = { wrist_cam = 0.5 }")
    assert [(joint.name, joint.value) for joint in held.arm.held] == [("wrist_cam", 0.5)]
    rng = np.random.default_rng(8)
    q, v, a = rng.uniform(-1.5, 1.5, (3, 5, 7))
    one, other = Arm(held.arm, held.paddle), Arm(fixed.arm, fixed.paddle)
    np.testing.assert_allclose(one.torque(q, v, a), other.torque(q, v, a), atol=1e-10)
    assert one.masses() == pytest.approx(other.masses(), abs=1e-12)
