"""What a laboratory may say of its HL7 feed, and what is told of a mistake."""

from typing import Any

import pytest
from pydantic import ValidationError

from pbm.records.feed import FeedSettings


@pytest.mark.parametrize(
    "given",
    [
        {},
        {"peers": ["10.1.2.3", "10.1.2.0/24", "2001:db8::/32"]},
        {"certificate": "a", "key": "b", "clients": "c"},
        {"encoding": "cp1252", "analyser_level": 2, "preliminary": False},
    ],
)
def test_what_fits_is_taken(given: dict[str, Any]) -> None:
    assert FeedSettings.model_validate(given)


@pytest.mark.parametrize(
    ("given", "told"),
    [
        ({"peers": ["lis.example"]}, "expected an address"),
        ({"peers": ["10.1.2.3/24"]}, "expected an address"),
        ({"certificate": "a", "key": "b"}, "together"),
        ({"encoding": "utf-9"}, "expected an encoding"),
        ({"analyser_level": 0}, "greater than or equal to 1"),
        ({"largest_message": 10}, "greater than or equal to 1000"),
        ({"idle_minutes": 0}, "greater than 0"),
        ({"port": 2575}, "Extra inputs"),
    ],
)
def test_what_does_not_fit_is_told(given: dict[str, Any], told: str) -> None:
    with pytest.raises(ValidationError, match=told):
        FeedSettings.model_validate(given)
