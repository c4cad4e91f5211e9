from __future__ import annotations

from pathlib import Path

import pytest
from pydantic import ValidationError

from service.settings import PREFIX, Settings, listed, load_settings

GOOD = {
    "compute_workers": 3,
    "compute_threads": 2,
    "queue": 0,
    "request_seconds": 2.5,
    "max_body_bytes": 4096,
    "max_coefficients": 7,
    "max_samples": 8,
    "max_json_values": 9,
    "max_memory_bytes": 2**21,
    "data_dir": Path("/somewhere/else"),
    "database_url": "postgresql://densityloom@localhost:5433/sets",
    "max_sets": 0,
    "max_store_bytes": 10,
    "cache_bytes": 0,
    "set_cache_bytes": 11,
    "require_keys": True,
    "allowed_hosts": "density.example.org,::1",
    "cors_origins": "https://dashboard.example.org, http://localhost:8000",
    "requests_per_minute": 0,
    "total_requests_per_minute": 600,
    "concurrent_per_key": 3,
    "max_inflight_bytes": 2**24,
    "body_seconds": 1.5,
    "send_seconds": 2.5,
    "stop_seconds": 0.0,
    "log_format": "json",
    "log_level": "debug",
}
BAD = {
    "compute_workers": ["0", "-1", "two", "1.5", ""],
    "compute_threads": ["0", "many"],
    "queue": ["-1", "x"],
    "request_seconds": ["0", "-3", "nan", "inf", "1e9"],
    "max_body_bytes": ["0", "100"],
    "max_coefficients": ["0"],
    "max_samples": ["0"],
    "max_json_values": ["0"],
    "max_memory_bytes": ["1000", "-1"],
    "data_dir": [""],
    "database_url": ["", "sqlite:///x.db", "mysql://localhost/x", "localhost"],
    "max_sets": ["-1"],
    "max_store_bytes": ["-1", "much"],
    "cache_bytes": ["-1"],
    "set_cache_bytes": ["-1"],
    "require_keys": ["", "perhaps", "2"],
    "allowed_hosts": ["density.example.org:80", "http://density.example.org", "*"],
    "cors_origins": ["*", "dashboard.example.org", "https://dashboard.example.org/", "ftp://a.b", "null"],
    "requests_per_minute": ["-1", "1.5"],
    "total_requests_per_minute": ["-1", "many"],
    "concurrent_per_key": ["0"],
    "max_inflight_bytes": ["1000"],
    "body_seconds": ["0", "inf"],
    "send_seconds": ["0", "nan"],
    "stop_seconds": ["-1", "1e9"],
    "log_format": ["xml", ""],
    "log_level": ["loud", "INFO"],
}


def test_tables_here_name_every_setting():
    assert set(GOOD) == set(BAD) == set(Settings.model_fields)


@pytest.mark.parametrize(("name", "value"), GOOD.items())
def test_every_setting_can_be_set(monkeypatch, name, value):
    monkeypatch.setenv(f"{PREFIX}{name.upper()}", str(value))
    loaded = load_settings()
    assert getattr(loaded, name) == value
    others = {other: getattr(loaded, other) for other in GOOD if other != name}
    monkeypatch.delenv(f"{PREFIX}{name.upper()}")
    assert others == {other: getattr(load_settings(), other) for other in others}


@pytest.mark.parametrize(("name", "value"), [(name, value) for name, values in BAD.items() for value in values])
def test_out_of_range_is_refused(monkeypatch, name, value):
    monkeypatch.setenv(f"{PREFIX}{name.upper()}", value)
    with pytest.raises(ValueError, match=name):
        load_settings()


@pytest.mark.parametrize("name", ["DENSITYLOOM_MAX_SAMPLE", "DENSITYLOOM_", "densityloom_workers"])
def test_unknown_name_is_refused(monkeypatch, name):
    monkeypatch.setenv(name, "1")
    with pytest.raises(ValueError, match="unknown setting") as caught:
        load_settings()
    assert name in str(caught.value)
    assert "DENSITYLOOM_MAX_SAMPLES" in str(caught.value)


def test_names_of_others_are_left_alone(monkeypatch):
    monkeypatch.setenv("DENSITY_SAMPLES", "x")
    load_settings()


def test_defaults_use_the_cores_once(monkeypatch):
    monkeypatch.setattr("service.settings._cores", lambda: 8)
    loaded = load_settings()
    assert (loaded.compute_workers, loaded.compute_threads) == (2, 4)
    monkeypatch.setattr("service.settings._cores", lambda: 1)
    loaded = load_settings()
    assert (loaded.compute_workers, loaded.compute_threads) == (1, 1)


def test_settings_do_not_change_and_have_descriptions():
    with pytest.raises(ValidationError):
        load_settings().queue = 3
    for name, field in Settings.model_fields.items():
        assert field.description, name


def test_settings_reach_a_worker_whole():
    loaded = load_settings()
    assert Settings.model_validate_json(loaded.model_dump_json()) == loaded


def test_items_of_a_list():
    assert listed("") == listed(" , ") == ()
    assert listed(" https://A.example , b") == ("https://a.example", "b")
