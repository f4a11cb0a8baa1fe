"""Shares of the work: waves for Luigi, lots for small targets."""

from hypothesis import given
from hypothesis import strategies as st

from skykiln.engine.lots import form_lots
from skykiln.engine.waves import PENDING, waves_of


@given(st.lists(st.integers(1, 400), max_size=60))
def test_waves_hold_every_task_once_in_order_and_stay_small(sizes):
    waves = waves_of(list(enumerate(sizes)))
    assert [task for wave in waves for task in wave] == list(range(len(sizes)))
    for wave in waves:
        assert sum(sizes[task] for task in wave) <= PENDING or len(wave) == 1


@given(st.lists(st.floats(0.001, 10), max_size=60), st.floats(0.1, 20))
def test_lots_hold_every_item_once_in_order_and_end_with_the_item_that_fills_them(seconds, longest):
    lots = form_lots(range(len(seconds)), seconds, longest)
    assert [item for lot in lots for item in lot] == list(range(len(seconds)))
    for lot in lots:
        assert sum(seconds[item] for item in lot[:-1]) < longest


def test_engine_scheduler_takes_back_a_task_at_once_and_gives_up_after_one_failure():
    """Luigi's own settings would swallow a second run within ten seconds, and retry for ever."""
    from skykiln.engine.waves import _Sound

    scheduler = _Sound().create_local_scheduler()
    assert scheduler._config.stable_done_cooldown_secs == 0
    assert scheduler._config.retry_count == 1
    assert _Sound().create_worker(scheduler, 1)._config.check_complete_on_run
