"""The tree of a URDF, the chain from its root to the tip, and what is held still beside the chain."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from functools import partial

from reach.errors import FaultList, nearest
from reach.formats.capped import ByKind
from reach.formats.urdf import HELD_AS_DRAWN, MOVING, Urdf, UrdfJoint, UrdfLink

MAX_JOINTS = 20  # moving joints between root and tip; arms have 6 or 7, arms on rails and trunks 10


@dataclass(frozen=True)
class Tree:
    """A URDF whose links hang together as one tree.

    Attributes
    ----------
    root : str
        Name of the root link.
    order : tuple of UrdfJoint
        Every joint, parents before children, otherwise in the file's order.
    path : tuple of UrdfJoint
        From the root to the tip, fixed ones included.
    """

    urdf: Urdf
    root: str
    tip: str
    order: tuple[UrdfJoint, ...]
    path: tuple[UrdfJoint, ...]

    @property
    def chain(self) -> tuple[UrdfJoint, ...]:
        """The joints that move the tip, in order."""
        return tuple(joint for joint in self.path if joint.kind in MOVING)

    @property
    def beside(self) -> tuple[UrdfJoint, ...]:
        """Joints off the chain that a value holds still."""
        on_path = {joint.name for joint in self.path}
        return tuple(j for j in self.order if j.kind in MOVING and j.name not in on_path)


def read_tree(urdf: Urdf, tip: str, tip_where: tuple[FaultList, str], faults: FaultList) -> Tree | None:
    """Check that links and joints form one tree and find the chain to `tip`.

    Parameters
    ----------
    tip_where : the fault list and place of the file that named the tip
    faults : those of the URDF

    Returns
    -------
    Tree or None, after noting why there is none
    """
    before = len(faults.faults)
    links = {link.name: link for link in urdf.links}
    _unique(urdf.links, "link", faults)
    _unique(urdf.joints, "joint", faults)
    parent_of: dict[str, UrdfJoint] = {}
    kinds = ByKind(faults)
    for joint in urdf.joints:
        for role, name in (("parent", joint.parent), ("child", joint.child)):
            if name not in links:
                kinds.add("links that do not exist", joint.place, partial(_no_link, role, name, links))
        other = parent_of.setdefault(joint.child, joint)
        if other is not joint:
            faults.add(
                joint.place,
                f'link "{joint.child}" already hangs on joint "{other.name}" (line {other.line}); '
                "a link has one parent, so loops can't be described",
            )
    kinds.close()
    if len(faults.faults) > before:
        return None
    order, root = _ordered(urdf, parent_of, faults)
    tip_faults, where = tip_where
    if tip not in links:
        tip_faults.add(where, f'link "{tip}" does not exist in {urdf.path}{nearest(tip, links)}')
        return None
    if root is None:
        return None
    path: list[UrdfJoint] = []
    name = tip
    while name in parent_of:
        path.insert(0, parent_of[name])
        name = parent_of[name].parent
    tree = Tree(urdf, root, tip, order, tuple(path))
    if not tree.chain:
        kind = "is the root link" if tip == root else "is fixed to the root link"
        tip_faults.add(where, f'"{tip}" {kind}: no joint moves it; name the link that carries the paddle')
        return None
    if len(tree.chain) > MAX_JOINTS:
        told = f"{len(tree.chain)} moving joints lead to it, more than the {MAX_JOINTS} of a chain"
        tip_faults.add(where, f"{told}; name a nearer tip, or make joints fixed")
        return None
    for joint in path:
        _fit_for_chain(joint, faults)
    return tree if len(faults.faults) == before else None


def _no_link(role: str, name: str, known: Iterable[str]) -> str:
    return f'its {role} link "{name}" does not exist{nearest(name, known)}'


def _unique(items: tuple[UrdfLink, ...] | tuple[UrdfJoint, ...], what: str, faults: FaultList) -> None:
    first: dict[str, int] = {}
    for item in items:
        line = first.setdefault(item.name, item.line)
        if line != item.line:
            faults.add(
                f"line {item.line}, {what} {item.name}", f"name already used in line {line}; rename one"
            )


def _ordered(
    urdf: Urdf, parent_of: Mapping[str, UrdfJoint], faults: FaultList
) -> tuple[tuple[UrdfJoint, ...], str | None]:
    """Joints with parents before children, and the one root; None where there are loops or several roots."""
    roots = [link for link in urdf.links if link.name not in parent_of]
    if len(roots) > 1:
        names = ", ".join(f'"{link.name}"' for link in roots[:6])
        faults.add(
            f"line {roots[1].line}, link {roots[1].name}",
            f"the file has {len(roots)} root links ({names}); join them to one tree with fixed joints",
        )
    children: dict[str, list[UrdfJoint]] = {}
    for joint in urdf.joints:
        children.setdefault(joint.parent, []).append(joint)
    order: list[UrdfJoint] = []
    waiting = [link.name for link in roots]
    while waiting:
        following = children.get(waiting.pop(0), [])
        order.extend(following)
        waiting.extend(joint.child for joint in following)
    reached = {joint.name for joint in order}
    circle = [joint for joint in urdf.joints if joint.name not in reached]
    if circle:
        names = ", ".join(joint.name for joint in circle[:6])
        faults.add(circle[0].place, f"joints {names} form a loop without a root; cut it")
    return tuple(order), roots[0].name if len(roots) == 1 and not circle else None


def _fit_for_chain(joint: UrdfJoint, faults: FaultList) -> None:
    if joint.kind in HELD_AS_DRAWN:
        faults.add(joint.place, f"a {joint.kind} joint on the way to the tip can't be driven; make it fixed")
    if joint.mimics is not None:
        faults.add(
            joint.place,
            f'it mimics "{joint.mimics}" on the way to the tip; coupled joints are not supported: '
            "make it fixed, or a joint of its own",
        )
