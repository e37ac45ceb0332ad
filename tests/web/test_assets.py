import re

from web.builders import Hub

from hub.web import assets


def sheet_of(hub: Hub) -> tuple[str, object]:
    client = hub.app().test_client()
    page = client.get("/login").text
    return re.search(r'rel="stylesheet" href="([^"]+)"', page).group(1), client


def test_the_sheet_s_address_holds_its_digest_and_may_be_kept(shown):
    address, client = sheet_of(shown)
    assert re.fullmatch(r"/look/[0-9a-f]{12}/book\.css", address)
    answer = client.get(address)
    assert answer.mimetype == "text/css"
    assert "immutable" in answer.headers["Cache-Control"]


def test_an_old_address_gives_the_present_sheet_not_to_be_kept(shown):
    _, client = sheet_of(shown)
    answer = client.get("/look/000000000000/book.css")
    assert answer.status_code == 200
    assert answer.headers["Cache-Control"] == "no-cache"


def test_nothing_but_the_assets_is_served(shown):
    _, client = sheet_of(shown)
    for path in ("/look/0/..%2ffactory.py", "/look/0/../factory.py", "/look/0/factory.py", "/static/book.css"):
        answer = client.get(path)
        assert answer.status_code in {303, 404}
        assert b"import" not in answer.data


def test_assets_load_nothing_from_elsewhere():
    for path in assets.FOLDER.iterdir():
        text = path.read_text(encoding="utf-8").replace("http://www.w3.org/2000/svg", "")
        assert "url(http" not in text
        assert "://" not in text
        assert "@import" not in text
        assert "@font-face" not in text


# WCAG 2.2, success criterion 1.4.3 and the definitions of contrast ratio and relative luminance.
def luminance(colour: str) -> float:
    channels = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in channels]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def contrast(one: str, other: str) -> float:
    light, dark = sorted((luminance(one), luminance(other)), reverse=True)
    return (light + 0.05) / (dark + 0.05)


def palettes() -> dict[str, dict[str, str]]:
    text = (assets.FOLDER / "book.css").read_text(encoding="utf-8")
    blocks = re.findall(r":root \{([^}]+)\}", text)
    light, dark = (dict(re.findall(r"--([a-z-]+): (#[0-9a-f]{6});", block)) for block in blocks[:2])
    return {"light": light, "dark": light | dark}


def test_the_contrast_formula_agrees_with_the_published_extremes():
    # WCAG 2.2: black on white is 21:1; equal colours are 1:1.
    assert round(contrast("#000000", "#ffffff"), 6) == 21
    assert contrast("#777777", "#777777") == 1


def test_words_have_the_contrast_that_wcag_asks_of_text():
    for name, palette in palettes().items():
        for words in ("ink", "pencil", "red"):
            assert contrast(palette[words], palette["sheet"]) >= 4.5, (name, words)
            assert contrast(palette[words], palette["paper"]) >= 4.5, (name, words)
        assert contrast(palette["print-words"], palette["paper"]) >= 4.5, name
        assert contrast(palette["print-words"], palette["sheet"]) >= 4.5, name


def test_traces_and_marks_have_the_contrast_that_wcag_asks_of_graphics():
    # Success criterion 1.4.11: 3:1 for parts of graphics needed to understand them.
    for name, palette in palettes().items():
        for mark in ("ink", "thin", "pencil"):
            assert contrast(palette[mark], palette["paper"]) >= 3, (name, mark)
