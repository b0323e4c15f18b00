"""The canonical URDF that the dynamics library gets: links, joints and inertias alone, under plain names.

Users' names never reach another parser, so any text is a legal name. Limits are not carried here (every
attribute is wide open): they live in JointLimits.
"""

from __future__ import annotations

from collections.abc import Iterable

from reach.formats.chain import Tree
from reach.formats.urdf import MOVING, UrdfJoint, UrdfLink

WIDE = "1e9"


def write_model(tree: Tree) -> tuple[str, dict[str, str]]:
    """Return the model's XML, and the model name of every joint beside the chain.

    Joint i of the chain is "chain_i", joints beside it "held_i", the rest "fixed_i"; the root link is
    "base", the tip "tip", others "link_i" in the order of the tree.
    """
    link_names = {tree.root: "base"}
    for number, joint in enumerate(tree.order):
        link_names[joint.child] = "tip" if joint.child == tree.tip else f"link_{number}"
    chain = [joint.name for joint in tree.chain]
    beside = [joint.name for joint in tree.beside]
    fixed = [joint.name for joint in tree.order if joint.kind not in MOVING]
    joint_names = {
        name: f"{stem}_{number}"
        for stem, names in (("chain", chain), ("held", beside), ("fixed", fixed))
        for number, name in enumerate(names)
    }
    links = {link.name: link for link in tree.urdf.links}
    lines = ['<robot name="arm">']
    for name, canonical in link_names.items():
        lines += _link(links[name], canonical)
    for joint in tree.order:
        parent, child = link_names[joint.parent], link_names[joint.child]
        lines += _joint(joint, joint_names[joint.name], parent, child)
    lines.append("</robot>")
    return "\n".join(lines) + "\n", {name: joint_names[name] for name in beside}


def _numbers(values: Iterable[float]) -> str:
    return " ".join(repr(float(value)) for value in values)


def _link(link: UrdfLink, name: str) -> list[str]:
    own = link.inertial
    if own is None:
        return [f'  <link name="{name}"/>']
    keys = ("ixx", "iyy", "izz", "ixy", "ixz", "iyz")
    moments = " ".join(f'{key}="{float(value)!r}"' for key, value in zip(keys, own.inertia, strict=True))
    return [
        f'  <link name="{name}">',
        "    <inertial>",
        f'      <origin xyz="{_numbers(own.origin.xyz_m)}" rpy="{_numbers(own.origin.rpy_rad)}"/>',
        f'      <mass value="{float(own.mass_kg)!r}"/>',
        f"      <inertia {moments}/>",
        "    </inertial>",
        "  </link>",
    ]


def _joint(joint: UrdfJoint, name: str, parent: str, child: str) -> list[str]:
    kind = {"prismatic": "prismatic", "revolute": "revolute", "continuous": "revolute"}.get(
        joint.kind, "fixed"
    )
    lines = [
        f'  <joint name="{name}" type="{kind}">',
        f'    <parent link="{parent}"/>',
        f'    <child link="{child}"/>',
        f'    <origin xyz="{_numbers(joint.origin.xyz_m)}" rpy="{_numbers(joint.origin.rpy_rad)}"/>',
    ]
    if kind != "fixed":
        lines += [
            f'    <axis xyz="{_numbers(joint.axis)}"/>',
            f'    <limit lower="-{WIDE}" upper="{WIDE}" effort="{WIDE}" velocity="{WIDE}"/>',
        ]
    return [*lines, "  </joint>"]
