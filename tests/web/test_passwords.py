import time

from argon2 import PasswordHasher, Type, extract_parameters

from hub.web.passwords import MINIMUM_LENGTH, hash_password, matches


def test_a_password_matches_its_own_hash_and_no_other():
    kept = hash_password("a field book and a pencil")
    assert matches(kept, "a field book and a pencil")
    assert not matches(kept, "a field book and a pen")
    assert not matches(kept, "")


def test_the_same_password_is_kept_differently_each_time():
    assert hash_password("the same words twice") != hash_password("the same words twice")


def test_nobody_and_nonsense_never_match():
    assert not matches(None, "nobody has this password")
    assert not matches("not a hash", "anything at all")


def test_parameters_are_at_least_what_is_recommended():
    # OWASP Password Storage Cheat Sheet, Argon2id: 19 MiB, two passes, one lane (from memory).
    parameters = extract_parameters(hash_password("long enough to be a password"))
    assert parameters.type is Type.ID
    assert parameters.memory_cost >= 19 * 1024
    assert parameters.time_cost >= 2
    assert MINIMUM_LENGTH >= 12


def test_hashes_of_other_parameters_still_match():
    older = PasswordHasher(time_cost=1, memory_cost=8192, parallelism=1).hash("made by an older version")
    assert matches(older, "made by an older version")


def test_nobody_takes_as_long_as_a_wrong_password():
    kept = hash_password("a field book and a pencil")

    def least(password_hash: str | None) -> float:
        taken = []
        for _ in range(5):
            start = time.perf_counter()
            matches(password_hash, "wrong")
            taken.append(time.perf_counter() - start)
        return min(taken)

    assert 0.3 < least(None) / least(kept) < 3
