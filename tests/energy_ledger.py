"""Every watt that a panel or the bare ground receives, followed bounce by bounce to where it ends.

A second way to the rejected flux, without the closed forms of the account: light is handed on from
panel to air to ground and back until none is left, and each entry says where it ended. All
quantities are arrays over instants or skies.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

BOUNCES = 80


@dataclass(frozen=True)
class Optics:
    """The surroundings of a panel at a moment.

    Attributes
    ----------
    ground : albedo of the ground
    ray_up, ray_back, ray_absorbed : first pass of the mirrored ray through clear air
    light_up, light_back, light_absorbed : the same of diffuse light from the ground
    overcast : weight of an overcast deck in what diffuse light meets
    clear_path : share of the mirrored ray that finds no cloud in its way
    deck_through, deck_back : transmittance and reflectance of the deck from below
    """

    ground: Any
    ray_up: Any
    ray_back: Any
    ray_absorbed: Any
    light_up: Any
    light_back: Any
    light_absorbed: Any
    overcast: Any
    clear_path: Any
    deck_through: float = 0.22
    deck_back: float = 0.68


@dataclass
class Ledger:
    """Where the light ended, W per m² of panel."""

    escaped: Any = 0.0
    in_air: Any = 0.0
    in_ground: Any = 0.0
    in_panel: Any = 0.0

    @property
    def total(self) -> Any:
        """All entries together."""
        return self.escaped + self.in_air + self.in_ground + self.in_panel

    @property
    def smallest(self) -> float:
        """The lowest entry of all."""
        return float(min(np.min(entry) for entry in vars(self).values()))

    def from_ground(self, light: Any, optics: Optics) -> None:
        """Diffuse light that rises from near the ground."""
        a = optics.overcast
        for _ in range(BOUNCES):
            deck = a * light
            clear = light - deck
            through = deck * optics.deck_through
            self.escaped = self.escaped + clear * optics.light_up + through * optics.light_up
            self.in_air = self.in_air + clear * optics.light_absorbed
            self.in_air = self.in_air + through * (1 - optics.light_up)
            self.in_air = self.in_air + deck * (1 - optics.deck_through - optics.deck_back)
            back = clear * optics.light_back + deck * optics.deck_back
            self.in_ground = self.in_ground + back * (1 - optics.ground)
            light = back * optics.ground

    def onto_ground(self, light: Any, optics: Optics) -> None:
        """Light that falls on the ground from above."""
        self.in_ground = self.in_ground + light * (1 - optics.ground)
        self.from_ground(light * optics.ground, optics)

    def mirrored_up(self, light: Any, optics: Optics) -> None:
        """A mirrored ray on its way up through clear air or under the deck."""
        free = light * optics.clear_path
        under = light - free
        through = under * optics.deck_through
        self.escaped = self.escaped + (free + through) * optics.ray_up
        self.in_air = self.in_air + free * optics.ray_absorbed + through * (1 - optics.ray_up)
        self.in_air = self.in_air + under * (1 - optics.deck_through - optics.deck_back)
        self.onto_ground(free * optics.ray_back + under * optics.deck_back, optics)


@dataclass(frozen=True)
class Arriving:
    """Light at the panel: beam on front and back, the sky's diffuse light, ground light in view."""

    beam_front: Any
    beam_back: Any
    diffuse: Any
    ground_light: Any

    @property
    def total(self) -> Any:
        """All of it."""
        return self.beam_front + self.beam_back + self.diffuse + self.ground_light


def bare(arriving: Arriving, optics: Optics) -> Ledger:
    """The same light without the panel."""
    ledger = Ledger()
    ledger.onto_ground(arriving.beam_front + arriving.beam_back + arriving.diffuse, optics)
    ledger.from_ground(arriving.ground_light, optics)
    return ledger


def with_panel(
    arriving: Arriving,
    optics: Optics,
    *,
    goes_up: Any,
    cos_tilt: float,
    reflectance: float,
    specular: float,
    back_reflectance: float,
) -> Ledger:
    """The light with the panel in its way."""
    ledger = Ledger()
    up, down = (1 + cos_tilt) / 2, (1 - cos_tilt) / 2

    front = arriving.beam_front
    ledger.in_panel = ledger.in_panel + front * (1 - reflectance)
    mirrored = front * reflectance * specular
    ledger.mirrored_up(np.where(goes_up, mirrored, 0.0), optics)
    ledger.onto_ground(np.where(goes_up, 0.0, mirrored), optics)
    matt = front * reflectance * (1 - specular)

    from_sky = arriving.diffuse * up
    ledger.in_panel = ledger.in_panel + from_sky * (1 - reflectance)
    ledger.from_ground(arriving.diffuse * cos_tilt * reflectance * specular, optics)
    ledger.onto_ground(arriving.diffuse * down * reflectance * specular, optics)
    matt = matt + from_sky * reflectance * (1 - specular)
    ledger.from_ground(matt * up, optics)
    ledger.onto_ground(matt * down, optics)

    behind = arriving.beam_back + arriving.diffuse * down
    ledger.in_panel = ledger.in_panel + behind * (1 - back_reflectance)
    ledger.onto_ground(behind * back_reflectance, optics)

    ledger.in_panel = ledger.in_panel + arriving.ground_light * (1 - reflectance)
    ledger.from_ground(arriving.ground_light * reflectance, optics)
    return ledger
