import json

import pytest

from leachkin.report import read_results

WHOLE = {
    "schema": 1,
    **dict.fromkeys(
        (
            "run",
            "balance",
            "kinetics",
            "tank",
            "heap",
            "cementation",
            "budget",
            "cautions",
            "assumed",
            "notes",
        )
    ),
}


def written(tmp_path, content):
    path = tmp_path / "results.json"
    path.write_bytes(content if isinstance(content, bytes) else json.dumps(content).encode())
    return path


def test_reads_the_file_or_its_folder(tmp_path):
    path = written(tmp_path, WHOLE)
    assert read_results(path) == WHOLE
    assert read_results(tmp_path) == WHOLE


@pytest.mark.parametrize(
    ("content", "message"),
    [
        (b"\xff\xfe\x00", "this is not UTF-8 text"),
        (b"time,extraction\n1,2\n", "this is not JSON"),
        ([1, 2], "holds no key 'schema'"),
        ({"type": "other"}, "holds no key 'schema'"),
        ({**WHOLE, "schema": 7}, "schema 7. Allowed: schema 1"),
        ({k: v for k, v in WHOLE.items() if k != "heap"}, "no key heap"),
    ],
)
def test_a_wrong_file_is_told(tmp_path, content, message):
    with pytest.raises(ValueError, match=f"results.json: .*{message}"):
        read_results(written(tmp_path, content))


def test_a_file_that_is_not_there(tmp_path):
    with pytest.raises(ValueError, match="no such file"):
        read_results(tmp_path / "nothing.json")
