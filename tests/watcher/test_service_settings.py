"""Plain settings become records, or an error that names the key."""

from __future__ import annotations

import dataclasses
from pathlib import Path
from typing import Any

import pytest

from watcher.service_settings import MailSettings, ServiceSettings, ServiceSettingsBroken

SMALLEST = {
    "laboratory": "Skerry Point Water Laboratory",
    "exports": ["/bench/exports"],
    "results": "/bench/results",
    "records": "/bench/records",
}
MAIL = {"server": "mail.example", "sender": "bench@example", "to": ["lead@example"]}


def test_the_smallest_settings_have_safe_defaults() -> None:
    """Four values are enough; the rest has defaults, and no mail is sent."""
    settings = ServiceSettings.from_plain(SMALLEST)

    assert settings == ServiceSettings(
        laboratory="Skerry Point Water Laboratory",
        exports=(Path("/bench/exports"),),
        results=Path("/bench/results"),
        records=Path("/bench/records"),
    )
    assert (settings.settle_seconds, settings.scan_seconds, settings.mail) == (5.0, 10.0, None)


def test_plain_values_make_the_same_record_again() -> None:
    """A record written as plain values and read again is the same."""
    settings = ServiceSettings.from_plain(SMALLEST | {"settle_seconds": 1, "mail": MAIL | {"about": ["fail"]}})
    plain = dataclasses.asdict(settings)

    assert ServiceSettings.from_plain(plain) == settings
    assert settings.mail is not None
    assert settings.mail.security == "starttls"


@pytest.mark.parametrize(
    ("change", "said"),
    [
        ({"settel_seconds": 1}, "settel_seconds: expected one of laboratory, exports,"),
        ({"settle_seconds": "5"}, "settle_seconds: expected a number from 0, got '5'"),
        ({"settle_seconds": -1}, "settle_seconds: expected a number from 0, got -1"),
        ({"events": "no"}, "events: expected true or false, got 'no'"),
        ({"memory_bytes": True}, "memory_bytes: expected a whole number from 0, got True"),
        ({"exports": []}, "exports: expected at least one folder"),
        ({"exports": "/bench/exports"}, "exports: expected a list, got '/bench/exports'"),
        ({"exports": ["exports"]}, "exports: expected an absolute path, got 'exports'"),
        ({"exports": ["/a/flame", "/b/flame"]}, "exports: expected folders with names that differ"),
        ({"results": "/bench/exports"}, "results: expected a folder that is not read as exports"),
        (
            {"records": "/bench/exports/r", "subfolders": True},
            "records: expected a folder that is not read as exports",
        ),
        ({"mail": "none"}, "mail: expected a map or none, got 'none'"),
        ({"mail": MAIL | {"port": "25"}}, r"mail\.port: expected a whole number from 0, got '25'"),
        ({"mail": MAIL | {"to": []}}, r"mail\.to: expected at least one address"),
        ({"mail": MAIL | {"security": "open"}}, r"mail\.security: expected one of starttls, tls, none"),
        ({"mail": MAIL | {"security": "none", "user": "bench"}}, r"mail\.security: expected starttls or tls where"),
        ({"mail": MAIL | {"about": ["warn"]}}, r"mail\.about: expected one of fail, incomplete"),
        ({"mail": MAIL | {"password": "salt"}}, r"mail\.password: expected one of server"),
    ],
)
def test_a_broken_setting_is_named(change: dict[str, Any], said: str) -> None:
    """The key, what was expected, what was found, what follows."""
    with pytest.raises(ServiceSettingsBroken, match=f"Setting {said}.*The service does not start"):
        ServiceSettings.from_plain(SMALLEST | change)


def test_a_missing_setting_is_named() -> None:
    """Settings without a default must be there."""
    with pytest.raises(ServiceSettingsBroken, match="Setting results: expected a value, got None"):
        ServiceSettings.from_plain({key: SMALLEST[key] for key in SMALLEST if key != "results"})
    with pytest.raises(ServiceSettingsBroken, match=r"Setting mail\.sender: expected a value"):
        MailSettings.from_plain({"server": "mail.example", "to": ["lead@example"]})
