"""What an installation can set, and what it is told when it cannot."""

import dataclasses
from datetime import timedelta
from pathlib import Path

import pytest

from service.settings import Settings, SettingsError, state_folder, variables

KEY = "rw_" + "a1-_B2c3" + "_" + "k" * 43


def read(**environ):
    return Settings.from_environment({"HOME": "/home/x", **environ})


def test_an_empty_environment_gives_the_defaults():
    settings = read()
    assert settings == Settings(
        database_url="sqlite:////home/x/.local/state/rimeward/rimeward.sqlite",
        host="127.0.0.1",
        port=8420,
        admin_key=None,
        demo=True,
        tls_cert=None,
        tls_key=None,
        behind_proxy=False,
        rooms_per_change=200,
        sweep_batch=50,
        memory_bytes=67_108_864,
        max_body_bytes=1_000_000,
        sweep_every=timedelta(seconds=1),
        clock_every=timedelta(seconds=1),
        idempotency_for=timedelta(hours=24),
        request_deadline=timedelta(seconds=10),
        log_level="info",
    )


def test_every_setting_is_read_from_its_variable():
    texts = {
        "RIMEWARD_DATABASE_URL": ("postgresql://rimeward@db/rimeward",) * 2,
        "RIMEWARD_HOST": ("::1", "::1"),
        "RIMEWARD_PORT": ("9000", 9000),
        "RIMEWARD_ADMIN_KEY": (KEY, KEY),
        "RIMEWARD_DEMO": ("0", False),
        "RIMEWARD_TLS_CERT": ("/etc/tls/cert.pem", Path("/etc/tls/cert.pem")),
        "RIMEWARD_TLS_KEY": ("/etc/tls/key.pem", Path("/etc/tls/key.pem")),
        "RIMEWARD_BEHIND_PROXY": ("yes", True),
        "RIMEWARD_ROOMS_PER_CHANGE": ("10", 10),
        "RIMEWARD_SWEEP_BATCH": ("5", 5),
        "RIMEWARD_MEMORY_BYTES": ("1048576", 1_048_576),
        "RIMEWARD_MAX_BODY_BYTES": ("20000", 20_000),
        "RIMEWARD_SWEEP_EVERY": ("250ms", timedelta(milliseconds=250)),
        "RIMEWARD_CLOCK_EVERY": ("0.5", timedelta(milliseconds=500)),
        "RIMEWARD_IDEMPOTENCY_FOR": ("2d", timedelta(days=2)),
        "RIMEWARD_REQUEST_DEADLINE": ("1m", timedelta(minutes=1)),
        "RIMEWARD_LOG_LEVEL": ("WARNING", "warning"),
    }
    assert set(texts) == set(variables())
    settings = read(**{name: text for name, (text, _) in texts.items()})
    told = {f"RIMEWARD_{name.upper()}": v for name, v in dataclasses.asdict(settings).items()}
    assert told == {name: value for name, (_, value) in texts.items()}


def test_a_variable_set_to_nothing_counts_as_not_set():
    assert read(RIMEWARD_PORT="", RIMEWARD_ADMIN_KEY=" ") == read()


def test_the_database_lies_in_the_state_folder_of_the_user():
    assert state_folder({"HOME": "/home/x", "XDG_STATE_HOME": "/var/s"}) == Path("/var/s/rimeward")
    # XDG base directory specification 0.8: "All paths set in these environment variables must be
    # absolute. If an implementation encounters a relative path […] it should […] ignore it."
    ignored = state_folder({"HOME": "/home/x", "XDG_STATE_HOME": "s"})
    assert ignored == Path("/home/x/.local/state/rimeward")


@pytest.mark.parametrize(
    ("name", "text", "allowed"),
    [
        ("DATABASE_URL", "postgres://db/x", "postgresql://"),
        ("DATABASE_URL", "mysql://db/x", "sqlite:///"),
        ("DATABASE_URL", "/var/lib/rimeward.sqlite", "sqlite:///"),
        ("HOST", "http://example.org/", "host name or address"),
        ("PORT", "65536", "from 0 to 65535"),
        ("PORT", "-1", "from 0 to 65535"),
        ("PORT", "8420.0", "whole number"),
        ("PORT", "٨٤٢٠", "whole number"),
        ("PORT", "9" * 5000, "whole number"),
        ("ROOMS_PER_CHANGE", "0", "from 1 to"),
        ("ADMIN_KEY", "secret", "43 characters"),
        ("ADMIN_KEY", KEY + "k", "43 characters"),
        ("ADMIN_KEY", KEY[:-1] + "!", "43 characters"),
        ("DEMO", "perhaps", "1 or 0"),
        ("SWEEP_EVERY", "0", "from 1 ms to 3600 s"),
        ("SWEEP_EVERY", "nan", "a duration"),
        ("SWEEP_EVERY", "1 fortnight", "a duration"),
        ("CLOCK_EVERY", "2m", "to 60 s"),
        ("IDEMPOTENCY_FOR", "999999999d", "to 30 d"),
        ("LOG_LEVEL", "chatty", "debug, info"),
    ],
)
def test_a_bad_value_is_refused_by_name_with_what_is_allowed(name, text, allowed):
    with pytest.raises(SettingsError) as refused:
        read(**{f"RIMEWARD_{name}": text})
    sentence = str(refused.value)
    assert sentence.startswith(f"RIMEWARD_{name} must be ")
    assert allowed in sentence


def test_secrets_appear_neither_in_a_refusal_nor_in_the_settings_as_text():
    with pytest.raises(SettingsError) as refused:
        read(RIMEWARD_ADMIN_KEY="hunter2")
    assert "hunter2" not in str(refused.value)
    with pytest.raises(SettingsError) as refused:
        read(RIMEWARD_DATABASE_URL="postgres://u:hunter2@db/x")
    assert "hunter2" not in str(refused.value)
    settings = read(RIMEWARD_ADMIN_KEY=KEY, RIMEWARD_DATABASE_URL="postgresql://u:hunter2@db/x")
    assert settings.admin_key == KEY
    assert KEY not in repr(settings)
    assert "hunter2" not in repr(settings)


def test_an_unknown_name_is_refused_with_the_nearest_known():
    with pytest.raises(SettingsError, match=r"RIMEWARD_DATABSE_URL .* RIMEWARD_DATABASE_URL"):
        read(RIMEWARD_DATABSE_URL="sqlite:///x")
    with pytest.raises(SettingsError, match=r"RIMEWARD_ADMINKEY .* RIMEWARD_ADMIN_KEY"):
        read(RIMEWARD_ADMINKEY=KEY)


def test_variables_that_kubernetes_adds_are_refused_with_the_remedy():
    with pytest.raises(SettingsError, match="enableServiceLinks"):
        read(RIMEWARD_PORT="tcp://10.0.0.7:8420", RIMEWARD_SERVICE_HOST="10.0.0.7")


def test_variables_of_others_are_left_alone():
    assert read(PORT="x", RIMEWARDEN="y", PATH="/bin") == read()


def test_settings_cannot_be_changed():
    with pytest.raises(dataclasses.FrozenInstanceError):
        read().port = 1


@pytest.mark.parametrize("host", ["127.0.0.1", "127.8.0.1", "::1", "localhost"])
def test_a_loopback_address_needs_no_tls(host):
    assert read(RIMEWARD_HOST=host).check_address() is None


@pytest.mark.parametrize("host", ["0.0.0.0", "::", "10.1.2.3", "rimeward.example", "127.1"])  # noqa: S104
def test_another_address_is_refused_without_tls_or_a_proxy(host, tmp_path):
    with pytest.raises(SettingsError, match=r"in the clear.*RIMEWARD_BEHIND_PROXY=1"):
        read(RIMEWARD_HOST=host).check_address()
    assert read(RIMEWARD_HOST=host, RIMEWARD_BEHIND_PROXY="1").check_address() is None
    cert, key = tmp_path / "cert.pem", tmp_path / "key.pem"
    cert.touch()
    key.touch()
    secured = read(RIMEWARD_HOST=host, RIMEWARD_TLS_CERT=str(cert), RIMEWARD_TLS_KEY=str(key))
    assert secured.check_address() is None


def test_half_of_tls_and_missing_files_are_refused(tmp_path):
    with pytest.raises(SettingsError, match="both"):
        read(RIMEWARD_TLS_CERT="/cert.pem").check_address()
    missing = str(tmp_path / "missing.pem")
    with pytest.raises(SettingsError, match=r"RIMEWARD_TLS_CERT names .*missing\.pem"):
        read(RIMEWARD_TLS_CERT=missing, RIMEWARD_TLS_KEY=missing).check_address()
