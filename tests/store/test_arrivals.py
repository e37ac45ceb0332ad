from hub.store import tables as t
from hub.store.arrivals import Arrival


def test_evidence_has_the_order_of_its_columns():
    arrival = Arrival(1, 10, {}, boot=2, sequence=3, import_id=4, device_ms={7: 6})
    assert dict(zip(t.EVIDENCE, arrival.evidence(7), strict=True)) == {
        "received_ms": 10,
        "device_ms": 6,
        "boot": 2,
        "sequence": 3,
        "import_id": 4,
    }
    assert arrival.evidence(8) == (10, None, 2, 3, 4)
