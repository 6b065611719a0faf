"""Unit kinds by name; one file each, one line here."""

from leanloop.registry import Registry

KINDS = Registry(
    "unit kind",
    "leanloop.units",
    {
        "absorber": "leanloop.units.absorber:Absorber",
        "stripper": "leanloop.units.stripper:Stripper",
        "mixer": "leanloop.units.mixer:Mixer",
        "splitter": "leanloop.units.splitter:Splitter",
        "heater": "leanloop.units.heater:Heater",
        "cooler": "leanloop.units.cooler:Cooler",
        "makeup": "leanloop.units.makeup:Makeup",
        "exchanger": "leanloop.units.exchanger:Exchanger",
        "flash_drum": "leanloop.units.flash_drum:FlashDrum",
        "decanter": "leanloop.units.decanter:Decanter",
        "valve": "leanloop.units.valve:Valve",
        "pump": "leanloop.units.pump:Pump",
        "blower": "leanloop.units.blower:Blower",
        "cleanup": "leanloop.units.cleanup:Cleanup",
        "degradation": "leanloop.units.degradation:Degradation",
    },
    "leanloop.units.base:Unit",
)
