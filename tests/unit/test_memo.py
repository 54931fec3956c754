"""What was computed last is kept, what was not used for the longest time goes first."""

from threading import Thread

from lfptools.analysis.memo import Memo


def test_a_value_is_made_once():
    made = []
    memo = Memo(2)
    assert [memo.get("a", lambda: made.append(1) or len(made)) for _ in range(3)] == [1, 1, 1]
    assert len(memo) == 1


def test_the_one_not_used_for_the_longest_time_goes_first():
    memo = Memo(2)
    memo.get("a", lambda: 1)
    memo.get("b", lambda: 2)
    memo.get("a", lambda: None)
    memo.get("c", lambda: 3)
    assert len(memo) == 2
    assert memo.get("a", lambda: "again") == 1
    assert memo.get("b", lambda: "again") == "again"


def test_threads_may_share_it():
    memo = Memo(8)
    wrong = []

    def work():
        for number in range(4000):
            key = number % 16
            if memo.get(key, lambda key=key: key) != key:
                wrong.append(key)

    threads = [Thread(target=work) for _ in range(4)]
    for each in threads:
        each.start()
    for each in threads:
        each.join()
    assert wrong == []
    assert len(memo) == 8
