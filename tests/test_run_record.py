import hashlib

from leachkin.run_record import RunRecord, program_version, sha256_of, stage_seed


def test_the_record_depends_on_inputs_only():
    first = RunRecord("0.1.0", 7, {"draws": 10}, {"b.csv": "2", "a.csv": "1"}, ("z", "a"))
    again = RunRecord("0.1.0", 7, {"draws": 10}, {"a.csv": "1", "b.csv": "2"}, ("a", "z"))
    assert first.to_dict() == again.to_dict()
    assert list(first.to_dict()["inputs"]) == ["a.csv", "b.csv"]


def test_hash_is_sha256():
    assert sha256_of(b"abc") == hashlib.sha256(b"abc").hexdigest()
    # FIPS 180-4 example value of the message "abc"
    assert sha256_of(b"abc").startswith("ba7816bf8f01cfea")


def test_stage_seeds_differ_by_stage_and_seed():
    seeds = {stage_seed(s, name) for s in (0, 1, 2**40) for name in ("heap", "tank", "kinetics")}
    assert len(seeds) == 9
    assert all(0 <= seed < 2**63 for seed in seeds)


def test_version_is_that_of_the_package():
    assert program_version().count(".") >= 2
