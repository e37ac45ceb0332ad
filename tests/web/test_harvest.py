import xml.etree.ElementTree as ET

from hub.web.harvest import HEIGHT, TOP, Harvested, bars, harvested


def day(date, panel, sky, ratio=None):
    return {"date": date, "panel_wh": panel, "clear_sky_wh": sky, "harvest_ratio": ratio}


def rectangles(days, kind):
    root = ET.fromstring(f"<div>{bars(days)}</div>")
    return [rect for rect in root.iter("rect") if rect.get("class") == kind]


def test_parts_of_a_day_are_added_up():
    found = harvested(
        [day("2026-05-31", 5.0, 20.0, 0.4), day("2026-05-31", 7.0, None, 0.9), day("2026-06-01", 1.0, 2.0, 0.5)]
    )
    assert found == [Harvested("2026-05-31", 12.0, 20.0, None), Harvested("2026-06-01", 1.0, 2.0, 0.5)]


def test_heights_are_in_proportion_and_stay_on_the_paper():
    days = harvested([day("2026-05-30", 10.0, 40.0), day("2026-05-31", 20.0, 40.0)])
    taken = [float(rect.get("height")) for rect in rectangles(days, "taken")]
    offered = [float(rect.get("height")) for rect in rectangles(days, "offered")]
    assert abs(taken[1] - 2 * taken[0]) <= 0.2
    assert abs(offered[0] - 4 * taken[0]) <= 0.3
    assert max(offered) <= HEIGHT - TOP + 0.1


def test_unknown_days_have_no_bar_and_a_day_of_nothing_has_a_thin_one():
    days = harvested([day("2026-05-30", None, 40.0), day("2026-05-31", 0.0, None)])
    assert len(rectangles(days, "taken")) == 1
    assert float(rectangles(days, "taken")[0].get("height")) == 0.5
    assert len(rectangles(days, "offered")) == 1


def test_nothing_known_is_no_drawing():
    assert bars([]) == ""
    assert bars(harvested([day("2026-05-30", None, None), day("2026-05-31", 0.0, 0.0)])) == ""


def test_bars_stay_within_the_width():
    days = harvested([day(f"2026-05-{i:02d}", 5.0 + i, 40.0) for i in range(1, 29)])
    for rect in rectangles(days, "offered"):
        assert 0 <= float(rect.get("x")[:-1]) <= 100 - float(rect.get("width")[:-1])


def test_each_day_is_told_in_words():
    words = Harvested("2026-05-31", 23.0, 46.0, 0.5).words.replace("\u00a0", " ")
    assert words == "31 May 2026: panel 23.0 Wh of 46.0 Wh under a clear sky, harvest ratio 50 %"
    assert Harvested("2026-05-31", None, None, None).words.endswith("panel not known")
