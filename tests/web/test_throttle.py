from hypothesis import given
from hypothesis import strategies as st

from hub.web import throttle
from hub.web.throttle import Throttle

T = 1_780_000_000_000


def fail(guard: Throttle, times: int, name: str = "keeper", address: str = "10.0.0.7", at: int = T) -> None:
    for _ in range(times):
        guard.failed(name, address, at)


def test_a_few_slips_cost_nothing():
    guard = Throttle()
    fail(guard, throttle.FREE_TRIES_NAME_AND_ADDRESS - 1)
    assert guard.wait_ms("keeper", "10.0.0.7", T) == 0


def test_each_further_failure_doubles_the_wait_up_to_the_longest():
    guard = Throttle()
    fail(guard, throttle.FREE_TRIES_NAME_AND_ADDRESS)
    waits = []
    for _ in range(12):
        waits.append(guard.wait_ms("keeper", "10.0.0.7", T))
        fail(guard, 1)
    assert waits[:4] == [4_000, 8_000, 16_000, 32_000]
    assert max(waits) == throttle.LONGEST_WAIT_MS


def test_the_wait_passes():
    guard = Throttle()
    fail(guard, throttle.FREE_TRIES_NAME_AND_ADDRESS)
    assert guard.wait_ms("keeper", "10.0.0.7", T + 3_999) == 1
    assert guard.wait_ms("keeper", "10.0.0.7", T + 4_000) == 0


def test_others_are_not_kept_waiting():
    guard = Throttle()
    fail(guard, 8)
    assert guard.wait_ms("keeper", "10.0.0.8", T) == 0
    assert guard.wait_ms("hand", "10.0.0.7", T) == 0


def test_one_address_trying_many_names_is_slowed_down():
    guard = Throttle()
    for i in range(throttle.FREE_TRIES_ADDRESS):
        guard.failed(f"name-{i}", "10.0.0.7", T)
    assert guard.wait_ms("another", "10.0.0.7", T) > 0


def test_many_addresses_trying_one_name_are_slowed_down():
    guard = Throttle()
    for i in range(throttle.FREE_TRIES_NAME):
        guard.failed("keeper", f"10.0.1.{i}", T)
    assert guard.wait_ms("keeper", "10.0.2.1", T) > 0


def test_success_forgets_the_failures_of_this_name_here():
    guard = Throttle()
    fail(guard, 6)
    guard.succeeded("keeper", "10.0.0.7")
    assert guard.wait_ms("keeper", "10.0.0.7", T) == 0


def test_old_failures_are_forgotten():
    guard = Throttle()
    fail(guard, 9)
    later = T + throttle.FORGET_AFTER_MS + 1
    fail(guard, 1, at=later)
    assert guard.wait_ms("keeper", "10.0.0.7", later) == 0


def test_memory_is_bounded():
    guard = Throttle()
    for i in range(throttle.MOST_KEYS):
        guard.failed(f"name-{i}", "10.0.0.7", T)
    assert len(guard._records) <= throttle.MOST_KEYS


@given(st.integers(1, 200), st.integers(-(10**9), 10**9))
def test_nobody_waits_longer_than_the_longest_wait_even_if_the_clock_jumps(failures, jump_ms):
    guard = Throttle()
    fail(guard, failures)
    assert 0 <= guard.wait_ms("keeper", "10.0.0.7", T + jump_ms) <= throttle.LONGEST_WAIT_MS
