"""The client's core without I/O: what is sent, what is believed, what is junk."""

from __future__ import annotations

import json
import zlib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from dwellbench.wire.core import Answer, Client, Junk, Notice, Refusal, seal, unseal
from dwellbench.wire.schemas import WrongMessage

STATE = {"n": 3, "boot": 1, "t": 10, "state": "rest", "stage": "idle", "why": ""}


def line(message: dict[str, object]) -> bytes:
    """A sealed line, made here without the code under test."""
    body = json.dumps({"jsonrpc": "2.0", **message}, separators=(",", ":")).encode()[:-1]
    return body + b',"crc":"%08x"}\n' % zlib.crc32(body)


def notice(**changes: object) -> bytes:
    return line({"method": "state", "params": {**STATE, **changes}})


def test_a_request_is_sealed_with_its_members_in_order() -> None:
    data, id_ = Client().request("run", {"run_key": "k", "volts_mv": 250000, "dwell_ms": 1000})
    message = json.loads(data)
    assert list(message) == ["jsonrpc", "id", "method", "params", "crc"]
    assert (message["id"], message["method"]) == (id_, "run")
    body = data[: data.rindex(b',"crc":')]
    assert data == body + b',"crc":"%08x"}\n' % zlib.crc32(body)


@pytest.mark.parametrize(
    ("method", "params"),
    [
        ("run", {}),
        ("run", {"run_key": "", "volts_mv": 1, "dwell_ms": 1}),
        ("samples", {"from": -1}),
        ("nonsense", {}),
    ],
)
def test_a_request_that_its_schema_does_not_allow_is_not_sent(method: str, params: dict[str, object]) -> None:
    with pytest.raises(WrongMessage):
        Client().request(method, params)


def test_answers_refusals_and_notices_are_told_apart() -> None:
    client = Client()
    _, one = client.request("keepalive")
    _, two = client.request("finish")
    events = client.receive(
        line({"result": {"t": 5}, "id": one})
        + line({"error": {"code": -32010, "message": "Not in this state", "data": "rest"}, "id": two})
        + notice()
    )
    answer, refusal, told = events
    assert isinstance(answer, Answer)
    assert answer.result == {"t": 5}
    assert isinstance(refusal, Refusal)
    assert (refusal.name, refusal.data) == ("not_now", "rest")
    assert isinstance(told, Notice)
    assert told.n == 3


HELLO: dict[str, object] = {
    "protocol": [1, 0],
    "firmware": "0",
    "build": "0" * 8,
    "model": "m",
    "box": "0" * 16,
}


def test_a_hello_of_our_version_must_be_whole() -> None:
    client = Client()
    _, id_ = client.request("hello")
    (event,) = client.receive(line({"result": HELLO, "id": id_}))
    assert isinstance(event, Junk)
    assert "ratings" in event.why


@pytest.mark.parametrize("protocol", [[2, 0], [0, 9], [2], [9, "x", None]])
def test_a_hello_of_another_version_is_heard_whatever_its_shape(protocol: list[object]) -> None:
    client = Client()
    _, id_ = client.request("hello")
    (event,) = client.receive(line({"result": {"protocol": protocol}, "id": id_}))
    assert isinstance(event, Answer)
    assert event.result["protocol"] == protocol


@pytest.mark.parametrize("protocol", [[], ["2", 0], 2, None, {"major": 2}])
def test_a_version_that_is_none_is_junk(protocol: object) -> None:
    client = Client()
    _, id_ = client.request("hello")
    (event,) = client.receive(line({"result": {"protocol": protocol}, "id": id_}))
    assert isinstance(event, Junk)


def test_every_answer_belongs_to_one_question() -> None:
    client = Client()
    _, id_ = client.request("keepalive")
    answer = line({"result": {"t": 5}, "id": id_})
    refusal = line({"error": {"code": -32010, "message": "Not in this state"}, "id": 77})
    kinds = [type(event).__name__ for event in client.receive(answer + answer + refusal)]
    assert kinds == ["Answer", "Junk", "Junk"]


JUNK = [
    b"hello\n",
    b"{}\n",
    b'{"jsonrpc":"2.0"}\n',
    notice()[:-12] + b'00000000"}\n',
    notice(state="nonsense"),
    notice(n="3"),
    notice(n=True),
    line({"method": "unheard", "params": {}}),
    line({"result": {"t": 1}, "id": 999}),
    b"\xff\xfe\x00\n",
    b"x" * 600 + b"\n",
]


@pytest.mark.parametrize("data", JUNK)
def test_junk_is_an_event_and_harms_nothing(data: bytes) -> None:
    client = Client()
    events = client.receive(data + notice())
    assert isinstance(events[0], Junk)
    assert events[0].why
    assert isinstance(events[-1], Notice)


def test_a_line_without_end_is_bounded() -> None:
    client = Client()
    assert client.receive(b"x" * 5000) == []
    assert len(client._partial) <= 512
    events = client.receive(b"x\n" + notice())
    assert isinstance(events[0], Junk)
    assert isinstance(events[1], Notice)


@given(st.lists(st.integers(1, 40), min_size=1, max_size=60))
def test_any_cutting_gives_the_same_events(cuts: list[int]) -> None:
    data = b"\n" + notice(n=1) + b"junk\n" + notice(n=2).replace(b"\n", b"\r\n") + notice(n=3)
    whole = Client().receive(data)
    client, at, pieces = Client(), 0, []
    for cut in cuts:
        pieces += client.receive(data[at : at + cut])
        at += cut
    pieces += client.receive(data[at:])
    assert pieces == whole
    assert [type(event).__name__ for event in whole] == ["Notice", "Junk", "Notice", "Notice"]


@given(st.dictionaries(st.text(max_size=5), st.integers() | st.text(max_size=20), min_size=1, max_size=4))
def test_what_is_sealed_is_unsealed(message: dict[str, object]) -> None:
    message.pop("crc", None)
    back = unseal(seal(message)[:-1])
    back.pop("crc")
    assert back == message
