"""The settings: what they are without a word, and what they refuse."""

import pytest

from service.settings import Settings, SettingsError, read_settings


@pytest.fixture(autouse=True)
def _nothing_set(monkeypatch: pytest.MonkeyPatch) -> None:
    """Start from an environment without a setting, whatever the developer's shell has."""
    for name in Settings.model_fields:
        monkeypatch.delenv(f"LANEWRIGHT_{name.upper()}", raising=False)


def test_without_a_setting_everything_lies_in_one_folder_and_listens_on_loopback() -> None:
    """The first start must be safe and need no configuration."""
    settings = read_settings()

    assert settings.host == "127.0.0.1"
    assert settings.port == 8080
    assert settings.database_url == "sqlite:///lanewright-data/lanewright.db"


def test_the_data_folder_moves_the_default_database(monkeypatch: pytest.MonkeyPatch) -> None:
    """Whoever backs up one folder must have everything."""
    monkeypatch.setenv("LANEWRIGHT_DATA", "/srv/salt")

    assert read_settings().database_url == "sqlite:////srv/salt/lanewright.db"


def test_the_short_name_of_postgresql_means_the_installed_driver(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """The URL that every other tool takes must work here, too."""
    monkeypatch.setenv("LANEWRIGHT_DATABASE", "postgresql://salt@localhost/plans")

    assert read_settings().database_url == "postgresql+psycopg://salt@localhost/plans"


@pytest.mark.parametrize("address", ["0.0.0.0", "192.0.2.7", "::", "salt.example"])  # noqa: S104 - must be refused
def test_an_address_that_others_could_reach_is_refused(
    monkeypatch: pytest.MonkeyPatch, address: str
) -> None:
    """There are no keys yet: whoever reaches the port may do everything."""
    monkeypatch.setenv("LANEWRIGHT_HOST", address)

    with pytest.raises(SettingsError, match="LANEWRIGHT_HOST"):
        read_settings()


@pytest.mark.parametrize("address", ["127.0.0.1", "127.8.9.1", "::1", "localhost"])
def test_every_loopback_address_is_taken(monkeypatch: pytest.MonkeyPatch, address: str) -> None:
    """The whole of 127.0.0.0/8 and ::1 stay on this machine (RFC 1122 3.2.1.3, RFC 4291 2.5.3)."""
    monkeypatch.setenv("LANEWRIGHT_HOST", address)

    assert read_settings().host in {address, "127.0.0.1"}


def test_a_password_in_a_refused_database_is_not_repeated(monkeypatch: pytest.MonkeyPatch) -> None:
    """The message goes to a log that more people read than may know the password."""
    monkeypatch.setenv("LANEWRIGHT_DATABASE", "oracle://salt:winter-secret@db/plans")

    with pytest.raises(SettingsError) as caught:
        read_settings()

    assert "winter-secret" not in str(caught.value)
    assert "postgresql://" in str(caught.value)


def test_every_wrong_setting_is_named_at_once(monkeypatch: pytest.MonkeyPatch) -> None:
    """Finding mistakes one restart at a time is no way to spend a night."""
    monkeypatch.setenv("LANEWRIGHT_PORT", "90000")
    monkeypatch.setenv("LANEWRIGHT_NESTING_MAX", "many")

    with pytest.raises(SettingsError) as caught:
        read_settings()

    assert [line.partition(":")[0] for line in str(caught.value).splitlines()] == [
        "LANEWRIGHT_PORT",
        "LANEWRIGHT_NESTING_MAX",
    ]


def test_limits_that_contradict_each_other_are_refused(monkeypatch: pytest.MonkeyPatch) -> None:
    """A body that may come in but never be unpacked would be refused with the wrong reason."""
    monkeypatch.setenv("LANEWRIGHT_BODY_UNPACKED_BYTES_MAX", "2048")

    with pytest.raises(SettingsError, match="BODY_WIRE_BYTES_MAX"):
        read_settings()
