"""The verbs: load a spec, design a chain for it, write and load a design, check it."""

from __future__ import annotations

import hashlib
import logging
from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, replace
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike, NDArray

from synth import circuit, folder
from synth.errors import CatalogError, CircuitError, InfeasibleError, SpecError
from synth.model.chain import Chain
from synth.model.judgement import Requirement, Verification
from synth.model.record import DesignRecord
from synth.parts import listing
from synth.parts.check import check_catalog
from synth.parts.op_amps import load_op_amps, select
from synth.parts.passives import capacitor_stock, coupling_stock, resistor_stock
from synth.parts.stock import load_drawer
from synth.planning import plan, plan_from_drawer
from synth.spec import Spec, load_spec, parse_spec, spec_to_dict, starter_spec
from synth.spec.files import read_text
from synth.topology.place import Stocks
from synth.verification import verify

if TYPE_CHECKING:
    import control

log = logging.getLogger(__name__)
BUILDS = 10_000
FloatArray = NDArray[np.float64]
ComplexArray = NDArray[np.complex128]


@dataclass(frozen=True, slots=True)
class Design:
    """A designed chain with its verdict; computes its figures from the exact circuit on request.

    Attributes:
        record: all of it as data.
        edited: True when parts were changed by hand since the tool wrote them.
    """

    record: DesignRecord
    edited: bool = False

    @property
    def spec(self) -> Spec:
        """What was asked."""
        return self.record.spec

    @property
    def chain(self) -> Chain:
        """The circuit as designed."""
        return self.record.chain

    @property
    def verification(self) -> Verification:
        """What the judges found."""
        return self.record.verification

    @property
    def requirements(self) -> tuple[Requirement, ...]:
        """Every requirement with its verdict."""
        return self.record.verification.requirements

    @property
    def meets_spec(self) -> bool:
        """True when every judged requirement is met."""
        return self.record.verification.all_met

    def network(self) -> circuit.Network:
        """The linear circuit behind every figure."""
        return circuit.build_network(self.record.chain)

    def response(self, frequencies: ArrayLike) -> ComplexArray:
        """Output over input [V per input unit] at frequencies [Hz], shape (F,)."""
        return circuit.response(self.network(), frequencies)

    def group_delay(self, frequencies: ArrayLike) -> FloatArray:
        """Group delay [s] at frequencies [Hz], shape (F,)."""
        return circuit.response_and_delay(self.network(), frequencies)[1]

    def noise(self, frequencies: ArrayLike) -> circuit.NoiseSpectrum:
        """Output noise density and its contributors at frequencies [Hz]."""
        return circuit.noise(self.network(), frequencies)

    def poles(self) -> ComplexArray:
        """Poles of the whole chain [rad/s]."""
        return circuit.poles(self.network(), self.chain.center_frequency)

    def to_zpk(self) -> tuple[ComplexArray, ComplexArray, float]:
        """Zeros, poles [rad/s] and gain, as scipy.signal takes them; the gain is exact at the centre."""
        network, center = self.network(), self.chain.center_frequency
        zeros, poles = circuit.zeros(network, center), circuit.poles(network, center)
        s = 2j * np.pi * center
        unit = np.exp(np.log(s - zeros).sum() - np.log(s - poles).sum())
        return zeros, poles, float((circuit.response(network, [center])[0] / unit).real)

    def to_control(self) -> control.TransferFunction:
        """The chain as a transfer function of the package `control`, frequency in rad/s."""
        import control

        zeros, poles, gain = self.to_zpk()
        return control.zpk(zeros, poles, gain)


def design(spec: Spec, builds: int = BUILDS, seed: int = 0) -> Design:
    """Design a chain for a spec.

    Args:
        spec: what is asked, from `load_spec` or `parse_spec`.
        builds: how many builds to draw for ranges and yield, 0 for none.
        seed: of every random draw.

    Raises:
        SynthError: the spec cannot be used or nothing can be built for it; the message says what would work.

    Example:
        >>> import synth
        >>> chain = synth.design(synth.parse_spec(synth.starter_spec()))
        >>> chain.meets_spec
        True
    """
    entries = load_op_amps(spec.catalog_files)
    with _naming(spec, "parts.op_amps: "):
        chosen = select(spec.parts.op_amps, entries) if spec.parts.op_amps else tuple(entries.values())
    with _naming(spec):
        op_amps, stocks = tuple(entry.op_amp for entry in chosen), stocks_for(spec)
        if spec.stock_file is None:
            found = plan(spec, op_amps, stocks, builds, seed)
        else:
            found = plan_from_drawer(spec, op_amps, stocks, load_drawer(spec.stock_file), builds, seed)
    log.info("chosen: %s", found.candidates[0].description)
    record = DesignRecord(
        spec, seed, _digests(spec), found.chain, found.family, found.order, found.verification, found.candidates
    )
    return Design(record)


@contextmanager
def _naming(spec: Spec, key: str = "") -> Iterator[None]:
    """Put the spec's name, and a key, in front of an error that does not name the file."""
    try:
        yield
    except (CatalogError, CircuitError, InfeasibleError) as error:
        if spec.source in str(error):
            raise
        raise type(error)(f"{spec.source}: {key}{error}") from error


def stocks_for(spec: Spec) -> Stocks:
    """The resistors and capacitors that a spec allows."""
    resistors, capacitors, extra = spec.parts.resistors, spec.parts.capacitors, spec.catalog_files
    with _naming(spec, "parts.resistors: "):
        ohms = resistor_stock(resistors.series, resistors.tolerance, resistors.temperature_coefficient, extra=extra)
    with _naming(spec, "parts.capacitors: "):
        farads = capacitor_stock(
            capacitors.series,
            capacitors.tolerance,
            capacitors.temperature_coefficient,
            capacitors.dielectric,
            extra=extra,
        )
    return Stocks(ohms, farads, coupling_stock(extra=extra))


def _digests(spec: Spec) -> dict[str, str]:
    """sha256 of the files that went in, by name; nothing for a spec that came from text."""
    files = [_spec_file(spec), *spec.catalog_files, spec.stock_file]
    return {f.name: hashlib.sha256(f.read_bytes()).hexdigest() for f in files if f is not None and f.is_file()}


def _spec_file(spec: Spec) -> Path | None:
    """The file that a spec was loaded from; None for one from text, whose source is but a name."""
    source = Path(spec.source)
    return source if spec.folder == source.parent and source.is_file() else None


def check(given: Design | Path | str) -> Design:
    """Rebuild the circuit from the parts alone and judge it anew.

    Args:
        given: a design, or the folder of one.
    """
    old = given if isinstance(given, Design) else load_design(given)
    drawn = old.verification.builds
    verdict = verify(old.chain, old.spec, drawn.count if drawn is not None else 0, old.record.seed, layout=True)
    if not old.edited:  # what the planner had to say still holds
        verdict = replace(verdict, cautions=old.verification.cautions)
    return replace(old, record=replace(old.record, verification=verdict))


def load_design(path: Path | str) -> Design:
    """Read a design folder.

    Raises:
        FolderError: it is no design folder of this tool, or was damaged.
    """
    return Design(folder.read_design(Path(path)), folder.is_edited(Path(path)))


def save_design(chain: Design, path: Path | str, force: bool = False) -> None:
    """Write a design folder, whole or not at all.

    Args:
        force: also replace a folder that is not a design, or whose parts were edited by hand.

    Raises:
        FolderError: the folder may not be replaced, or the disk refuses.
    """
    folder.write_folder(Path(path), design_files(chain), force)


def check_folder(path: Path | str, spec: Spec, force: bool = False) -> None:
    """Refuse a folder that may not be replaced before anything is computed."""
    folder.check_target(Path(path), force, {"spec.toml": spec_text(spec).encode()})


def design_files(chain: Design) -> Mapping[str, bytes]:
    """Content of every file of the design folder, by name."""
    from synth.output import bill, group_delay_plot, noise_plot, report, response_plot

    record = chain.record
    return {
        "spec.toml": spec_text(record.spec).encode(),
        "design.json": folder.to_json(record).encode(),
        "bom.csv": bill.bill_csv(record).encode(),
        "chain.cir": netlist(chain).encode(),
        "report.txt": report.report_text(record).encode(),
        "response.svg": response_plot.response_svg(record),
        "group_delay.svg": group_delay_plot.group_delay_svg(record),
        "noise.svg": noise_plot.noise_svg(record),
    }


def netlist(chain: Design, with_noise: bool = True) -> str:
    """The chain as a netlist for any simulator of the SPICE3 class."""
    comments = ["input: 1 V at node in stands for one input unit; output: node out"]
    comments += [f"{s.name}: {s.topology}, {s.op_amp}, output node {s.output_node}" for s in chain.chain.stages]
    return circuit.netlist_text(
        chain.network(), chain.spec.title, comments, chain.chain.center_frequency, with_noise=with_noise
    )


def report(chain: Design) -> str:
    """The report at 80 columns."""
    from synth.output import report as text

    return text.report_text(chain.record)


def json_text(chain: Design) -> str:
    """The content of design.json."""
    return folder.to_json(chain.record)


def parts_text(
    kind: str = "op-amps",
    catalogs: Sequence[Path] = (),
    as_json: bool = False,
    *,
    min_gbw: str | None = None,
    noise_at: str | None = None,
    max_noise: str | None = None,
    supply: str | None = None,
    technology: str | None = None,
) -> str:
    """Parts of the catalogs as a table or JSON; op amps by what is asked of them, as texts with units.

    Raises:
        CatalogError: unknown kind, a catalog or a quantity that cannot be used, or op amps' figures asked of others.
    """
    from synth.output import parts_table

    query = listing.op_amp_query(min_gbw, noise_at, max_noise, supply, technology)
    if kind == "op-amps":
        lines = listing.list_op_amps(query, load_op_amps(catalogs))
        return parts_table.op_amp_json(lines, query) if as_json else parts_table.op_amp_table(lines, query)
    sheets = listing.sheets(kind, catalogs)
    if query != listing.OpAmpQuery():
        raise CatalogError(f"kind {kind}: only op amps are chosen by their figures; leave the kind or the figures out")
    return parts_table.sheet_json(sheets) if as_json else parts_table.kind_table(kind, sheets)


def part_text(name: str, kind: str | None = None, catalogs: Sequence[Path] = (), as_json: bool = False) -> str:
    """One part of the catalogs whole, with the provenance of each figure, as text or JSON.

    Raises:
        CatalogError: no catalog has it, or one cannot be used.
    """
    from synth.output import parts_table

    sheet = listing.find_sheet(name, kind, catalogs)
    return parts_table.sheet_json(sheet) if as_json else parts_table.sheet_text(sheet)


def catalog_text(path: Path, as_json: bool = False) -> tuple[bool, str]:
    """Whether a catalog can be used, and all that is wrong in it or what it holds, as text or JSON."""
    from synth.output import parts_table

    found = check_catalog(path)
    return not found.problems, parts_table.report_json(found) if as_json else parts_table.report_text(found)


def merged_bill(folders: Sequence[Path], boards: int = 1, as_json: bool = False) -> str:
    """One bill of materials for several design folders and several boards of each, as CSV or JSON.

    Raises:
        FolderError: a folder cannot be read or is named twice.
    """
    from synth.output import merged_bill as merging

    bill = merging.merged_bill([(path, load_design(path).record) for path in folders], boards)
    return merging.merged_json(bill) if as_json else merging.merged_csv(bill)


def write_text(path: Path, text: str) -> None:
    """Write a new text file.

    Raises:
        SpecError: the file is there already, or cannot be written.
    """
    try:
        with path.open("x", encoding="utf-8") as file:
            file.write(text)
    except FileExistsError:
        raise SpecError(f"{path}: is there already; name another file or remove it") from None
    except OSError as error:
        raise SpecError(f"{path}: cannot be written: {error.strerror}; name another file") from error


def spec_text(spec: Spec) -> str:
    """The spec as TOML: the file it came from, or one written from its figures.

    Raises:
        SpecError: the file has changed since it was read.
    """
    source = _spec_file(spec)
    if source is not None:
        text = read_text(source, "a spec")
        if parse_spec(text, spec.source, spec.folder) != spec:
            raise SpecError(f"{source}: has changed since it was read; load it again")
        return text
    import tomli_w

    return tomli_w.dumps(spec_to_dict(spec))


__all__ = [
    "Design",
    "catalog_text",
    "check",
    "check_folder",
    "design",
    "design_files",
    "json_text",
    "load_design",
    "load_spec",
    "merged_bill",
    "netlist",
    "parse_spec",
    "part_text",
    "parts_text",
    "report",
    "save_design",
    "spec_text",
    "starter_spec",
    "stocks_for",
    "write_text",
]
