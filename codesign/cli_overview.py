"""What ``cnr --help`` says: the commands in the order in which people come to need them, a line for each."""

from __future__ import annotations

#: Help of the whole program; ``\b`` keeps the lines that follow as they are.
ABOUT = (
    "Find the LEDs, drive currents, filter, camera and exposure that make a defect stand out of the noise most: the "
    "greatest contrast-to-noise ratio (CNR) within all limits, with a proof.\n\n"
    "\b\nTo begin:  cnr demos                 what there is to try\n"
    "           cnr solve yellow-stain    the main job on a demo\n"
    "           cnr new my-part.toml      a problem file of your own"
)

#: Commands and what they are for, at most 60 characters; others follow in the order of their making.
OVERVIEW = {
    "demos": "List the demo problems, each a file to copy.",
    "new": "Write a commented problem file that runs as it is.",
    "parts": "List, filter and inspect the parts of a catalogue.",
    "solve": "Find the recipe of greatest CNR, with its proof.",
    "check": "Predict what a recipe does and which limits it misses.",
    "sensitivity": "Price each limit; tell what data-sheet tolerances do.",
    "vary": "Ask what if: fields set or swept, or other parts.",
    "worth": "Tell what each part in use is worth, and what replaces it.",
    "trade": "Trade CNR against exposure, heat, number of LEDs or price.",
    "routes": "Tell what would have to change to reach a CNR.",
    "tolerance": "Predict the yield over rigs built from real parts.",
    "robust": "Find the recipe that holds up best when parts stray.",
    "calibrate": "Fit the light of each LED to measured grey values.",
    "family": "Solve all variants of a product, a recipe for each.",
    "radiation": "Compare the light at the eye with published limits.",
    "schema": "Print the JSON Schema of a file, for editors and programs.",
}


def in_order(names: list[str]) -> list[str]:
    """Return names of commands as they are listed."""
    order = list(OVERVIEW)
    return sorted(names, key=lambda name: order.index(name) if name in OVERVIEW else len(order))
