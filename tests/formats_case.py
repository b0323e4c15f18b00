"""A small invented cell that the tests of the readers write to disk, bend and read."""

from __future__ import annotations

from pathlib import Path

import pytest

from reach.cell import Cell
from reach.errors import Fault, InputError
from reach.formats import load_cell

URDF = """<?xml version="1.0"?>
<robot name="invented">
  <link name="foot"/>
  <link name="upper">
    <inertial>
      <origin xyz="0 0 0.15" rpy="0 0 0"/>
      <mass value="3.0"/>
      <inertia ixx="0.03" iyy="0.03" izz="0.004" ixy="0" ixz="0" iyz="0"/>
    </inertial>
  </link>
  <link name="slide">
    <inertial>
      <origin xyz="0 0 0.1" rpy="0 0 0"/>
      <mass value="1.0"/>
      <inertia ixx="0.004" iyy="0.004" izz="0.001" ixy="0" ixz="0" iyz="0"/>
    </inertial>
  </link>
  <link name="flange"/>
  <link name="jaw">
    <inertial>
      <mass value="0.1"/>
      <inertia ixx="1e-4" iyy="1e-4" izz="1e-4" ixy="0" ixz="0" iyz="0"/>
    </inertial>
  </link>
  <joint name="j1" type="revolute">
    <parent link="foot"/><child link="upper"/>
    <origin xyz="0 0 0.2" rpy="0 0 0"/>
    <axis xyz="0 1 0"/>
    <limit lower="-1.5" upper="2.0" velocity="2.0" effort="50"/>
  </joint>
  <joint name="j2" type="prismatic">
    <parent link="upper"/><child link="slide"/>
    <origin xyz="0 0 0.3" rpy="0 0 0"/>
    <axis xyz="0 0 1"/>
    <limit lower="0.0" upper="0.4" velocity="1.0" effort="200"/>
  </joint>
  <joint name="face" type="fixed">
    <parent link="slide"/><child link="flange"/>
    <origin xyz="0 0 0.2"/>
  </joint>
  <joint name="grip" type="revolute">
    <parent link="flange"/><child link="jaw"/>
    <axis xyz="1 0 0"/>
    <limit lower="0.1" upper="0.8" velocity="1.0" effort="5"/>
  </joint>
</robot>
"""

LIMITS = """[joints.j1]
velocity_rad_s = 1.5
acceleration_rad_s2 = [-10, 12]
torque_rate_nm_s = 800
friction_nm = 0.4
source = "invented data sheet"
[joints.j2]
position_m = [0.05, 0.5]
torque_rate_n_s = 4000
armature_kg = 0.3
"""

CELL = """[arm]
urdf = "arm.urdf"
limits = "limits.toml"
tip = "flange"
start_deg = { j1 = 30.0 }
start_m = { j2 = 0.1 }

[paddle]
mount = { xyz_m = [0, 0, 0.05], rpy_deg = [0, 90, 0] }
shape = "disc"
radius_m = 0.08
thickness_m = 0.01
mass_kg = 0.2

[[paddle.part]]
mass_kg = 0.05
com_m = [0, 0, -0.03]

[follow]
commands = "log.csv"
frame = "world"
point = "strike"
"""

LOG = """t_s,vx_m_s,vy_m_s,vz_m_s,wx_rad_s,wy_rad_s,wz_rad_s,strike
0.00,0,0,0.1,0,0,0,0
0.05,0,0,0.2,0,0,0,1
0.10,0,0,0.1,0,0,0,0
"""


STRIKES = """x_m,y_m,z_m,nx,ny,nz,paddle_speed_m_s,dx,dy,dz
0.3,0,0.5,0,0,2,1.0,0,0,1
0.4,-0.1,0.5,0.6,0,0.8,0.5,0,3,4
"""


def write_cell(
    folder: Path,
    cell: str | bytes = CELL,
    urdf: str | bytes = URDF,
    limits: str | bytes = LIMITS,
    log: str | bytes = LOG,
    strikes: str | bytes = STRIKES,
) -> Path:
    """Write the files and return the cell's path."""
    names = ("cell.toml", "arm.urdf", "limits.toml", "log.csv", "strikes.csv")
    for name, content in zip(names, (cell, urdf, limits, log, strikes), strict=True):
        (folder / name).write_bytes(content if isinstance(content, bytes) else content.encode())
    return folder / "cell.toml"


def replaced(text: str, old: str, new: str) -> str:
    """The text with `old` replaced; `old` must stand in it exactly once."""
    assert text.count(old) == 1, f"{old!r} stands {text.count(old)} times"
    return text.replace(old, new)


def load(folder: Path, **files: str | bytes) -> Cell:
    """Write and read a cell."""
    return load_cell(write_cell(folder, **files))


def faults_of(folder: Path, **files: str | bytes) -> tuple[Fault, ...]:
    """Faults of a cell that must not load."""
    with pytest.raises(InputError) as caught:
        load(folder, **files)
    return caught.value.faults


def only_fault(faults: tuple[Fault, ...], file: str, where: str, *words: str) -> None:
    """Exactly one fault: in that file, at that place, its message holding those words."""
    assert len(faults) == 1, "\n".join(map(str, faults))
    expect_fault(faults, file, where, *words)


def expect_fault(faults: tuple[Fault, ...], file: str, where: str, *words: str) -> None:
    """One of the faults is in that file, at that place, and its message holds those words."""
    told = "\n".join(map(str, faults))
    here = [fault for fault in faults if Path(fault.file).name == file and fault.where == where]
    assert here, told
    assert any(all(word in fault.what for word in words) for fault in here), told
