"""Settings: option before environment before default, and a sentence for a bad value."""

from __future__ import annotations

import dataclasses

import pytest

from ladderband.settings import SettingError, Settings, load_settings, settings_table, variable


def test_defaults():
    assert load_settings({}) == Settings()


def test_option_wins_over_environment_over_default():
    environ = {"LADDERBAND_PORT": "1", "LADDERBAND_THREADS": "7"}
    settings = load_settings(environ, port="2", workers=None)
    assert (settings.port, settings.threads, settings.workers) == (2, 7, 2)


@pytest.mark.parametrize("text", ["1", "true", "YES", "on"])
def test_true(text):
    assert load_settings({"LADDERBAND_ALLOW_OPEN": text}).allow_open


@pytest.mark.parametrize(
    ("name", "text"),
    [("PORT", "x"), ("PORT", "-1"), ("WORKERS", "0"), ("WORK_S", "nan"), ("DEADLINE_S", "inf"),
     ("ALLOW_OPEN", "maybe"), ("PORT", "1.5")],
)  # fmt: skip
def test_a_bad_value_is_named(name, text):
    with pytest.raises(SettingError, match=f"LADDERBAND_{name}"):
        load_settings({f"LADDERBAND_{name}": text})


def test_environment_makes_the_same_settings_elsewhere():
    settings = Settings(port=1, cors_origins="https://a.example", log_requests=False, work_s=0.5)
    assert load_settings(settings.environment()) == settings


def test_every_setting_is_explained():
    table = settings_table()
    for item in dataclasses.fields(Settings):
        assert item.metadata["meaning"].endswith(".")
        assert variable(item.name) in table
        assert "--" + item.name.replace("_", "-") in table


def test_origins_and_data_folder():
    assert Settings(cors_origins=" https://a.example, *").origins == {"https://a.example", "*"}
    assert Settings(data_dir="~/x").data_path.is_absolute()
