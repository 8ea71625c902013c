"""Standing cautions that every report and the demo carry, in general words."""

from __future__ import annotations

from typing import Final

CAUTIONS: Final = (
    "A match is evidence, not proof. Not found is not absent: small amounts, poorly crystalline and non-cubic"
    " phases can go unseen.",
    "A perfect cubic fit does not prove cubic symmetry: some tetragonal and orthorhombic cells give the same"
    " lines.",
    "Work that is regulated (health, safety, acceptance of material) needs the accredited method and a"
    " licensed or authorised person.",
    "X-rays and high voltage are for trained, authorised people under the local radiation rules.",
    "Many powders are harmful to breathe or touch (silica, nickel, cobalt, lead, beryllium, thorium and"
    " uranium compounds among them): the local safety data and rules apply.",
)
