"""What becomes cable: pieces joined across gaps, against the rule spelled out piece by piece."""

import numpy as np
import pytest

from morphotone.cable.assumptions import Assumptions
from morphotone.cable.traced import trace
from morphotone.reading.reconstruction import reconstruct


def scattered(pieces, key):
    """Draw short pieces in a small box, the first of which holds the soma; text and positions by sample."""
    rng = np.random.default_rng(key)
    lines, position = [], []
    for piece in range(pieces):
        for step in range(rng.integers(1, 6)):
            place = rng.uniform(0.0, 60.0, 3) if step == 0 else position[-1] + rng.normal(0.0, 2.0, 3)
            position.append(place)
            number, kind = len(position), 1 if (piece, step) == (0, 0) else 3
            x, y, z = place.tolist()
            lines.append(f"{number} {kind} {x!r} {y!r} {z!r} 0.5 {number - 1 if step else -1}")
    return "\n".join(lines), np.array(position)


def bridges(position, tree, gap):
    """Return the sample of each joined piece and the sample it is hung from, round by round."""
    found, last, waiting = {}, [0], set(range(1, tree.max() + 1))
    while last:
        reached = []
        for piece in waiting:
            pairs = [
                (float(np.linalg.norm(position[a] - position[b])), a, b)
                for a in np.flatnonzero(tree == piece)
                for b in np.flatnonzero(np.isin(tree, last))
            ]
            distance, sample, onto = min(pairs)
            if distance <= gap:
                found[int(sample)] = int(onto)
                reached.append(piece)
        last, waiting = reached, waiting - set(reached)
    return found


@pytest.mark.parametrize("key", [3, 5, 8, 9])
def test_pieces_are_joined_where_they_are_nearest_round_by_round(key):
    text, position = scattered(40, key)
    rec = reconstruct(text.encode(), file="tree.swc", cell="tree")
    traced = trace(rec, Assumptions(orphans="joined", orphan_gap_um=14.0))
    expected = bridges(position, rec.tree, 14.0)
    assert 5 < len(expected) < 39  # some joined, some over several rounds, some left
    assert (traced.joined, traced.orphans) == (len(expected), 39 - len(expected))
    assert {sample: traced.parent[sample] for sample in expected} == expected
    known = {frozenset(edge) for edge in enumerate(rec.parent.tolist()) if edge[1] >= 0}
    edges = {frozenset(edge) for edge in enumerate(traced.parent.tolist()) if edge[1] >= 0}
    assert edges == known | {frozenset(bridge) for bridge in expected.items()}
    assert np.count_nonzero(traced.parent < 0) == traced.orphans + 1


@pytest.mark.parametrize("rule", ["sphere", "auto"])
def test_what_no_correction_changes_is_not_copied(rule):
    rec = reconstruct(b"1 1 0 0 0 5 -1\n2 3 50 0 0 1 1\n", file="tree.swc", cell="tree")
    plain = trace(rec, Assumptions(soma_rule=rule))
    assert plain.position is rec.position
    assert plain.radius is rec.radius
    corrected = trace(
        rec,
        Assumptions(shrinkage=(1.0, 2.0, 1.0), diameter_factor=1.1, diameter_offset_um=0.2, soma_rule=rule),
    )
    np.testing.assert_array_equal(corrected.position, rec.position * [1.0, 2.0, 1.0])
    np.testing.assert_allclose(corrected.radius, [5.6, 1.2], rtol=1e-15)
    assert corrected.soma.radius == pytest.approx(5.6)
