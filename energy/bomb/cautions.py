"""Cautions of bomb work, in general terms: said on screen, in the terminal's help and in the README."""

from __future__ import annotations

CAUTIONS = (
    "A bomb holds oxygen under high pressure and a fire inside: the maker's manual, local codes and licensed people decide"
    " what may be burnt and how. Nothing here says that a run is safe.",
    "Keep to the energy the vessel is rated for, sample, aid and capsule together, and to the sample mass and the oxygen"
    " pressure of its manual; start an unknown material with a fraction of the usual mass.",
    "No oil, grease or other fuel on threads, seals and fittings that oxygen reaches.",
    "Never burn explosives, propellants, peroxides, or volatile or unknown materials without the approval of those who"
    " answer for safety.",
    "Stand away from the vessel while it is fired and for the time the manual gives after; never open one that failed to"
    " fire before that time is over.",
    "Vent slowly, in a hood or outdoors, before opening.",
    "Look at vessel, seals and electrodes before every run, and keep to the dates of inspection and pressure test.",
)
