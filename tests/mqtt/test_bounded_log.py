from hub.mqtt.bounded_log import LAST_LINES, LONGEST_LINE, BoundedLog


def test_the_newest_lines_are_at_hand_and_on_disk(tmp_path):
    log = BoundedLog(tmp_path / "log")
    log.follow(f"line {n}\n".encode() for n in range(LAST_LINES + 5))
    assert log.last_lines()[0] == "line 5"
    assert (tmp_path / "log").read_text().splitlines()[0] == "line 0"
    log.forget()
    assert log.last_lines() == []


def test_it_does_not_grow_without_end(tmp_path):
    log = BoundedLog(tmp_path / "log", limit=1000)
    log.follow(b"x" * 99 + b"\n" for _ in range(200))
    sizes = [file.stat().st_size for file in tmp_path.iterdir()]
    assert len(sizes) == 2
    assert sum(sizes) < 2 * (1000 + 200)


def test_long_and_undecodable_lines_are_survived(tmp_path):
    log = BoundedLog(tmp_path / "log")
    log.follow([b"\xff\xfe\n", b"y" * 10_000_000])
    assert log.last_lines()[0] == "��"
    assert len(log.last_lines()[1]) == LONGEST_LINE


def test_a_log_that_cannot_be_written_loses_only_itself(tmp_path):
    log = BoundedLog(tmp_path / "missing" / "log")
    log.follow([b"still at hand\n"])
    assert log.last_lines() == ["still at hand"]
