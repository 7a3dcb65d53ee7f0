"""What an assay is made of: sound chargers, defects with sizes, and what the procedure claims to find of them."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from drivers.text.binding import Bound
from drivers.text.faults import BadInput, Faults, Place
from drivers.text.nearest import unknown
from drivers.text.quantity import QuantityFault
from drivers.virtual.charger_file import CHARGERS, ChargerFile
from drivers.virtual.defects import Defect, Size, load_defect, quantity_of, shipped_defects, spoiled
from drivers.virtual.imperfection import generator
from sequencer.cli.access import charger_for
from sequencer.engine.inputs import FOLDERS, Asked, Inputs, gather
from sequencer.model.procedure import Procedure

BENCH = "virtual-in-process"
ANY = "any"


@dataclass(frozen=True)
class Product:
    """A specification with the sound virtual charger of the same name."""

    name: str
    inputs: Inputs
    charger: Bound[ChargerFile]


@dataclass(frozen=True)
class Trial:
    """One run: a product's procedure on its sound charger, or on one with a defect.

    It carries its files as they were read, so that one who edits them meanwhile does not change the assay.
    """

    product: str
    inputs: Inputs
    charger: Bound[ChargerFile]
    seed: int
    defect: Defect | None = None
    size: Size | None = None
    claimed: bool = False

    @property
    def words(self) -> str:
        what = "sound" if self.defect is None else self.defect.name
        return f"{what}{f' {self.size}' if self.size else ''} on {self.product}, seed {self.seed}"

    @property
    def folder(self) -> str:
        return f"{self.defect.name if self.defect else 'sound'}-{self.product}-{self.seed}"


@dataclass(frozen=True)
class AssayPlan:
    """All trials, and what a person should know of what was left out."""

    procedure: str
    trials: tuple[Trial, ...]
    notes: tuple[str, ...]
    untried: tuple[str, ...]  # claims that no trial puts to the test


def plan_assay(procedure: str, specs: Sequence[str], defects: str, seeds: Sequence[int]) -> AssayPlan:
    """Read and check every file. Raises BadInput with all faults of all files."""
    products, notes = _products(procedure, specs)
    claiming = products[0].inputs.procedure
    faults = Faults()
    chosen = _defects(defects, faults)
    claims = Claims.of(claiming, chosen, faults)
    faults.raise_if_any()
    trials = [Trial(one.name, one.inputs, one.charger, seed) for one in products for seed in seeds]
    for defect in chosen:
        fitting = [product for product in products if defect.model.fits_on(product.charger)]
        if not fitting:
            notes.append(f"{defect.model.name} was not tried: none of these chargers is what it is for")
        trials += [_spoiled(defect, fitting, seed, claims, faults) for seed in seeds if fitting]
    faults.raise_if_any()
    tried = [(one.defect.claimed_as, one.claimed) for one in trials if one.defect is not None]
    # who asks for some chargers or some defects has left the other claims out on purpose
    asked = {kind for kind, _ in tried} if specs or defects != "all" else set(claims.least)
    untried = tuple(kind for kind in claims.least if kind in asked and (kind, True) not in tried)
    return AssayPlan(claiming.model.name, tuple(trials), tuple(notes), untried)


def _spoiled(defect: Bound[Defect], fitting: list[Product], seed: int, claims: Claims, faults: Faults) -> Trial:
    """The defect on one of the chargers that it fits, drawn by the seed."""
    model, size = defect.model, defect.model.drawn(seed)
    product = fitting[int(generator(seed, model.name, "charger").integers(len(fitting)))]
    before = len(faults.found)
    charger = spoiled(defect, size, product.charger, faults)
    if charger is None and len(faults.found) == before:
        faults.add(defect.place("change"), f"makes no charger of {product.name}")
    return Trial(product.name, product.inputs, charger or product.charger, seed, model, size, claims.cover(model, size))


# products


def shipped_products() -> list[str]:
    """Names that ship as a specification and as a charger."""
    chargers = {path.stem for path in CHARGERS.glob("*.yaml")}
    return sorted(path.stem for path in FOLDERS["specification"].glob("*.yaml") if path.stem in chargers)


def _products(procedure: str, specs: Sequence[str]) -> tuple[list[Product], list[str]]:
    """The products asked for, all of them sound; or of those that ship, the ones that the procedure can be run on."""
    found, notes, bad = list[Product](), list[str](), list[BadInput]()
    for spec in dict.fromkeys(specs or shipped_products()):
        try:
            found.append(_product(procedure, spec))
        except BadInput as reason:
            bad.append(reason)
            notes.append(f"{Path(spec).stem} is left out, the procedure cannot be run on it: {reason.faults[0]}")
    if bad and (specs or not found):
        raise BadInput([fault for reason in bad for fault in reason.faults])
    return found, notes


def _product(procedure: str, spec: str) -> Product:
    inputs = gather(Asked(procedure, spec, None, BENCH))
    charger = charger_for(inputs.bench, None, spec, inputs.pack)
    assert charger is not None, f"{BENCH} is a virtual bench"
    return Product(Path(spec).stem, inputs, charger)


# defects and claims


def _defects(asked: str, faults: Faults) -> list[Bound[Defect]]:
    names = shipped_defects() if asked == "all" else [name.strip() for name in asked.split(",") if name.strip()]
    if not names:
        faults.add(Place("--defects"), "'all', or names of defects with commas between them, were expected")
    found = [load_defect(name, faults, place=Place("--defects")) for name in dict.fromkeys(names)]
    return [defect for defect in found if defect is not None]


@dataclass(frozen=True)
class Claims:
    """What the procedure claims: kinds of defect, from which size on (None: any)."""

    least: dict[str, Size | None]

    @classmethod
    def of(cls, procedure: Bound[Procedure], chosen: Sequence[Bound[Defect]], faults: Faults) -> Claims:
        """Read the claims. Faults are added for a kind that no defect has, and for a size of another kind."""
        shipped = [one for name in shipped_defects() if (one := load_defect(name, faults))]
        known = {**_ranges(shipped), **_ranges(chosen)}
        least = dict[str, Size | None]()
        for kind, text in procedure.model.claims.items():
            place = procedure.place("claims", kind)
            if kind not in known:
                faults.add(place, unknown(kind, known, "kind of defect"))
                continue
            try:
                least[kind] = _least(text, known[kind])
            except ValueError as fault:
                faults.add(place, f"{kind}: {fault}")
        return cls(least)

    def cover(self, defect: Defect, size: Size | None) -> bool:
        """Whether the procedure claims to find this defect in this size; one without a size is as big as can be."""
        if defect.claimed_as not in self.least:
            return False
        least = self.least[defect.claimed_as]
        return least is None or size is None or size.value >= least.value


def _ranges(defects: Sequence[Bound[Defect]]) -> dict[str, set[str]]:
    """Kind of defect -> what its sizes are: voltages, shares, ..."""
    found = dict[str, set[str]]()
    for defect in defects:
        size = defect.model.size
        found.setdefault(defect.model.claimed_as, set()).update([size.least.dimension] if size else [])
    return found


def _least(text: str, dimensions: set[str]) -> Size | None:
    if text == ANY:
        return None
    try:
        size = Size(*quantity_of(text))
    except QuantityFault as fault:
        raise ValueError(f'{fault}; or "{ANY}"') from fault
    if not dimensions:
        raise ValueError(f'"{text}": defects of this kind have no size; expected "{ANY}"')
    if dimensions != {size.dimension}:
        raise ValueError(f'"{text}" is a {size.dimension}; sizes of this kind are: {", ".join(sorted(dimensions))}')
    return size
