from hub.errors import StoreError


def test_a_hub_that_is_well_says_so_without_login(hub):
    answer = hub.app().test_client().get("/healthz")
    assert answer.status_code == 200
    assert answer.json == {"status": "ok", "database": "readable"}


def test_a_database_that_cannot_be_read_is_told(hub, monkeypatch):
    app = hub.app()

    def fail():
        raise StoreError("The database is damaged.")

    monkeypatch.setattr(hub.database, "read", fail)
    answer = app.test_client().get("/healthz")
    assert answer.status_code == 503
    assert answer.json == {"status": "failing", "database": "not readable"}


def test_it_tells_no_more_than_that(shown):
    assert "ridge" not in shown.app().test_client().get("/healthz").text
