"""Settings from the environment."""

import stat

import pytest

from service.settings import SETTINGS, Settings, SettingsError


def test_nothing_set_gives_the_defaults():
    """An empty environment, and empty values, leave the defaults that are documented."""
    settings = Settings.from_environment({"SOJOURN_PORT": "", "PATH": "/bin"})
    for setting in SETTINGS:
        if setting.field not in ("admin_key", "workers"):
            assert str(getattr(settings, setting.field)).removesuffix(".0") == setting.default, setting.name
    assert settings.workers >= 1
    assert settings.admin_key is None


def test_every_field_can_be_set():
    """There is a variable for every field."""
    assert {setting.field for setting in SETTINGS} == set(Settings.__dataclass_fields__)


def test_values_are_read():
    """Each variable sets its field."""
    settings = Settings.from_environment(
        {"SOJOURN_PORT": "0", "SOJOURN_DATA": "/srv/x", "SOJOURN_TIME_ZONE": "Pacific/Auckland", "SOJOURN_WORKERS": "3"}
    )
    assert (settings.port, str(settings.data), settings.time_zone) == (0, "/srv/x", "Pacific/Auckland")
    assert settings.workers == 3


@pytest.mark.parametrize(
    ("name", "value", "words"),
    [
        ("SOJOURN_PORT", "70000", "whole number from 0 to 65535"),
        ("SOJOURN_PORT", "-1", "whole number"),
        ("SOJOURN_WORKERS", "0", "whole number from 1"),
        ("SOJOURN_WORKERS", "²", "whole number from 1"),
        ("SOJOURN_TIME_ZONE", "Mars/Base", "Unknown time zone"),
        ("SOJOURN_MINIMUM_STAY_HOURS", "nan", "number from 0"),
        ("SOJOURN_DEFAULT_ERROR_SD_M", "wide", "number from 0.001"),
        ("SOJOURN_ADMIN_KEY", "short", "at least 8"),
    ],
)
def test_bad_value_is_refused(name, value, words):
    """The refusal names the variable and what it takes."""
    with pytest.raises(SettingsError, match=f"{name} cannot be .*{words}"):
        Settings.from_environment({name: value})


def test_all_bad_values_are_named_and_no_key_is_shown():
    """Everything wrong is said at once; a key is never repeated."""
    with pytest.raises(SettingsError) as refusal:
        Settings.from_environment({"SOJOURN_PORT": "x", "SOJOURN_WORKERS": "y", "SOJOURN_ADMIN_KEY": "secret"})
    assert str(refusal.value).count("cannot be") == 3
    assert "secret" not in str(refusal.value)


def test_a_misspelt_setting_is_refused():
    """SOJOURN_PROT must not leave the port at its default, unsaid."""
    with pytest.raises(SettingsError, match="SOJOURN_PROT is no setting"):
        Settings.from_environment({"SOJOURN_PROT": "9000", "PATH": "/bin"})


def test_admin_key_is_made_once_and_kept_private(tmp_path):
    """The first start writes a key that only its owner can read; later starts read it; a given one is used as it is."""
    settings = Settings(data=tmp_path / "data")
    first = settings.with_admin_key()
    path = tmp_path / "data" / "admin.key"
    assert stat.S_IMODE(path.stat().st_mode) == 0o600
    assert path.read_text().strip() == first.admin_key
    assert len(first.admin_key) >= 32
    assert settings.with_admin_key().admin_key == first.admin_key
    assert Settings(data=tmp_path, admin_key="given-key").with_admin_key().admin_key == "given-key"
