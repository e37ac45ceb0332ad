import inspect

import pytest

from hub import errors

FAMILY = [found for _, found in inspect.getmembers(errors, inspect.isclass)]


@pytest.mark.parametrize("kind", FAMILY, ids=lambda kind: kind.__name__)
def test_every_error_a_person_reads_is_of_one_family_and_has_an_exit_code(kind):
    assert issubclass(kind, errors.PackfoldError)
    assert str(kind("One sentence.")) == "One sentence."
    assert kind.exit_code in {1, 2}


def test_wrong_use_is_told_apart_from_work_that_failed():
    wrong = {kind.__name__ for kind in FAMILY if kind.exit_code == 2}
    assert wrong == {"SettingsError", "UsageError"}
