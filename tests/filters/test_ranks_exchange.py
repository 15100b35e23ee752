"""The exchange between ranks, with threads in their place; the real one is in tests/host."""

import threading

import numpy as np
import pytest
from vtkmodules.vtkCommonDataModel import vtkMultiBlockDataSet

import fieldviz as fv
from fieldviz.filters import ranks as module
from fieldviz.filters.ranks import Ranks, shared_blocks, whole_snapshot
from fieldviz.filters.trees import fill_tree


class Threads:
    """As many ranks as threads; what they exchange meets in a list."""

    def __init__(self, size):
        self.size, self.rows = size, [None] * size
        self.barrier = threading.Barrier(size, timeout=60)

    def run(self, monkeypatch, work):
        own, found = threading.local(), [None] * self.size

        class OneRank(Ranks):
            def __init__(rank):  # noqa: N805
                rank.rank, rank.size = own.rank, self.size

            def _joined(rank, row):  # noqa: N805
                self.rows[rank.rank] = row.copy()
                self.barrier.wait()
                joined = np.concatenate(self.rows)
                self.barrier.wait()
                return joined

        monkeypatch.setattr(module, "Ranks", OneRank)

        def one(rank):
            own.rank = rank
            try:
                found[rank] = work(OneRank())
            except fv.FieldvizError as error:
                found[rank] = error

        threads = [threading.Thread(target=one, args=(rank,)) for rank in range(self.size)]
        for thread in threads:
            thread.start()
        for thread in threads:
            thread.join()
        return found


@pytest.mark.parametrize("at_once", [8, 1000, 2**28])
def test_everyone_gets_what_everyone_hands_in(at_once, monkeypatch):
    monkeypatch.setattr(module, "_AT_ONCE", at_once)
    handed = [{"rank": 0}, [], np.arange(300.0)]
    for answers in Threads(3).run(monkeypatch, lambda rank: rank.gather(handed[rank.rank])):
        assert answers[:2] == handed[:2]
        np.testing.assert_array_equal(answers[2], handed[2])


@pytest.mark.parametrize(("count", "pieces"), [(72, 4), (5, 3), (1, 4), (7, 1)])
def test_every_block_has_one_rank(count, pieces):
    shares = [shared_blocks(count, piece, pieces) for piece in range(pieces)]
    assert [block for share in shares for block in share] == list(range(count))
    assert max(map(len, shares)) - min(map(len, shares)) <= 1


def tree_of(disc, blocks):
    tree = vtkMultiBlockDataSet()
    fill_tree(tree, disc, only=blocks)
    return tree


def test_blocks_of_all_ranks_make_the_snapshot(monkeypatch):
    disc = fv.demo_disc(shape=(4, 16, 16), levels=2)
    count = disc.grid.n_blocks
    # More ranks than are needed: one has nothing.
    trees = [tree_of(disc, shared_blocks(count, n, 2)) for n in range(2)] + [tree_of(disc, ())]
    found = Threads(3).run(monkeypatch, lambda rank: whole_snapshot(trees[rank.rank], "test"))
    for snapshot in found:
        np.testing.assert_array_equal(snapshot.cell("density"), disc.cell("density"))
        np.testing.assert_array_equal(snapshot.faces["magnetic_r"], disc.faces["magnetic_r"])
        np.testing.assert_array_equal(snapshot.grid.r_edges, disc.grid.r_edges)


def test_one_rank_that_fails_fails_all(monkeypatch):
    disc = fv.demo_disc(shape=(4, 16, 16), levels=2)
    count = disc.grid.n_blocks
    from vtkmodules.vtkCommonDataModel import vtkPolyData

    half, threads = tree_of(disc, shared_blocks(count, 0, 2)), Threads(2)
    wrong = {"vtkPolyData": vtkPolyData(), f"all {count} blocks": tree_of(disc, ())}
    for words, other in wrong.items():
        given = (half, other)
        found = threads.run(
            monkeypatch, lambda rank, given=given: whole_snapshot(given[rank.rank], "do it")
        )
        for error in found:
            assert "Cannot do it" in str(error)
            assert words in str(error)
