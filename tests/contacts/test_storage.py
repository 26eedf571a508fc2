"""Storage: rooms, films and the water that stays on the metal."""

from __future__ import annotations

import numpy as np
import pytest

from purity.contacts.storage import environment_of, grown, relative_humidity, storage_films, store


def test_rooms_are_told_apart_by_oxygen_and_humidity() -> None:
    assert environment_of(1e-5, 0.4) == "dry inert"
    assert environment_of(0.209, 0.05) == "dry air"
    assert environment_of(0.209, 0.45) == "indoor air"
    assert environment_of(0.209, 0.9) == "humid air"


def test_water_at_its_own_pressure_is_saturated(stored) -> None:  # type: ignore[no-untyped-def]
    """2,645 Pa at 22 degC (steam tables); half of it is half."""
    setting = stored()
    assert relative_humidity(setting, np.array([2645.0]))[0] == pytest.approx(1.0, rel=0.02)
    assert relative_humidity(setting, np.array([1322.5]))[0] == pytest.approx(0.5, rel=0.02)
    assert relative_humidity(setting, np.array([1e5]))[0] == 1.0


def test_a_film_grows_and_never_shrinks_with_time(stored) -> None:  # type: ignore[no-untyped-def]
    films = storage_films(stored(), "indoor air")
    assert any(film.name == "oxide" for film, _ in films)
    for film, _ in films:
        thickness = [grown(film, np.array([86400.0 * d]), 295.0)[0] for d in (1, 10, 100, 1000)]
        assert np.all(np.diff(thickness) >= 0)
        assert 0 < thickness[-1] < 1e-6


def test_room_air_leaves_water_on_the_metal_and_a_film_of_oxide(stored) -> None:  # type: ignore[no-untyped-def]
    setting = stored()
    contact = next(c for c in setting.choice.contacts if c.role == "gas")
    made = store(contact, setting)
    h, o = setting.impurities.index("H"), setting.impurities.index("O")
    assert made.gain is not None
    assert made.gain[h, 0] == pytest.approx(2 * made.gain[o, 0])
    assert any(film.nu[o] > 0 for film in made.exposure.films)
    assert not made.gaps
