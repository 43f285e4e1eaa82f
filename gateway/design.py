"""From a plant file to everything that can be known before the first measurement.

The one place where a plant file becomes physics, a linear network and a synthesis:

    Plant -> physics (SI) -> operating point (outputs at their targets) -> Jacobians -> exact sections, held couplings
          -> network in scaled deviations -> rows -> Design, Observer

Scaled deviations, so that every number the numerics see is of the order of one:

    outputs, inputs   (value − operating point) / width of the signal's span
    states            deviation / width of the output that shows it, else / its own operating value
    disturbances      in spans per period: a disturbance of 1 moves the state it enters by its whole scale in one period
"""

from __future__ import annotations

import hashlib
import json
from dataclasses import asdict, dataclass, field
from importlib.metadata import version

import numpy as np
from scipy import sparse

from controllers import Design, Network, Noise, Observer, Of, Quantity, Settings
from controllers.arrays import Floats, Ints, block_diagonal
from controllers.linearise import OperatingPoint, colour_columns, discretise, equilibrium, held_coupling_error, jacobian
from gateway.plantfile.canonical import canonical
from gateway.plantfile.plant import Plant, Role, Signal
from sim_plant.physics import COUPLINGS, PHYSICS
from sim_plant.plant import Network as PhysicsNetwork


@dataclass(frozen=True)
class Scaling:
    """Turns engineering values into the network's scaled deviations and back; arrays follow the network's order."""

    x_zero: Floats
    x_unit: Floats
    y_zero: Floats
    y_width: Floats
    u_zero: Floats
    u_width: Floats
    w_zero: Floats
    w_unit: Floats

    def y(self, engineering: Floats) -> Floats:
        """Scale outputs, (p,)."""
        return (engineering - self.y_zero) / self.y_width

    def y_back(self, scaled: Floats) -> Floats:
        """Outputs in engineering units, (p,)."""
        return scaled * self.y_width + self.y_zero

    def u(self, engineering: Floats) -> Floats:
        """Scale inputs, (m,)."""
        return (engineering - self.u_zero) / self.u_width

    def u_back(self, scaled: Floats) -> Floats:
        """Inputs in engineering units, (m,)."""
        return scaled * self.u_width + self.u_zero


@dataclass(frozen=True)
class KnownDisturbance:
    """A measured disturbance: its signal, and its place in w."""

    signal: Signal
    place: int


@dataclass(frozen=True)
class PlantDesign:
    """A plant file's design, frozen: physics, network, synthesis, observer, and who is where.

    It prints as its fingerprint: a megabyte of numbers helps nobody in an error message.

    Attributes:
        outputs: measured signals in the order of y.
        inputs: driven signals in the order of u.
        known: measured disturbances.
        point: operating point, SI.
        coupling_error: one-step error of holding the couplings, fraction of span.
        fingerprint: of the canonical plant file and the design built from it.
    """

    plant: Plant = field(repr=False)
    physics: PhysicsNetwork = field(repr=False)
    point: OperatingPoint = field(repr=False)
    network: Network = field(repr=False)
    synthesis: Design = field(repr=False)
    observer: Observer = field(repr=False)
    scaling: Scaling = field(repr=False)
    outputs: tuple[Signal, ...] = field(repr=False)
    inputs: tuple[Signal, ...] = field(repr=False)
    known: tuple[KnownDisturbance, ...] = field(repr=False)
    coupling_error: float
    fingerprint: str

    @property
    def section_of_input(self) -> tuple[int, ...]:
        """Index of the section of every input."""
        return tuple(int(i) for i in self.network.section_of_input())


def physics_of(plant: Plant) -> PhysicsNetwork:
    """Build the plant's nonlinear physics, SI."""
    sections = [(spec.name, PHYSICS[spec.physics](**spec.parameters)) for spec in plant.sections]
    couplings = [(spec.one, spec.other, COUPLINGS[spec.kind](**spec.parameters)) for spec in plant.couplings]
    return PhysicsNetwork(sections, couplings)


def operating_point_of(plant: Plant, physics: PhysicsNetwork) -> OperatingPoint:
    """Where the plant rests with its outputs at their targets: all that a simulated plant needs of a design.

    Raises:
        EquilibriumError: there is no such point; the message says which equation is worst.
    """
    return _operating_point(physics, _Order.of(plant, physics))


def build_design(plant: Plant) -> PlantDesign:
    """Build the design of a plant.

    Raises:
        ControllerError: no operating point, not localizable, or no observer; the message says which section and why.
    """
    physics = physics_of(plant)
    order = _Order.of(plant, physics)
    point = _operating_point(physics, order)
    a, b, e, c = _jacobians(physics, point)
    a_d, b_d, e_d = discretise(a, b, e, physics.x_at, plant.period_s)

    y_width = np.array([signal.width * signal.scale.factor for signal in order.outputs])
    u_width = np.array([signal.width * signal.scale.factor for signal in order.inputs])
    x_unit = _state_units(c[list(order.output_rows)], y_width, point.x)
    w_unit = _disturbance_units(e_d, x_unit)
    network = _scaled_network(plant, physics, order, (a_d, b_d, e_d, c), (x_unit, u_width, w_unit, y_width))

    synthesis = Design.build(
        network,
        _quantities(plant, order),
        horizon=plant.controller.horizon,
        locality=plant.controller.locality,
        settings=Settings(
            rho=plant.controller.rho,
            relax=plant.controller.relax,
            tolerance_spans=plant.controller.tolerance_spans / 2,
            max_iterations=plant.controller.max_iterations,
        ),
    )
    noise = np.array([max(signal.noise, 1e-6 * signal.width) / signal.width for signal in order.outputs])
    worst = float(noise.max())
    observer = Observer.build(
        network,
        Noise(
            output=noise,
            state=np.full(network.a.shape[0], 0.1 * worst),
            wander=np.full(network.e.shape[1], plant.controller.wander * worst),
        ),
    )
    return PlantDesign(
        plant=plant,
        physics=physics,
        point=point,
        network=network,
        synthesis=synthesis,
        observer=observer,
        scaling=_scaling(order, physics, point, x_unit, w_unit),
        outputs=order.outputs,
        inputs=order.inputs,
        known=order.known,
        coupling_error=held_coupling_error(a, a_d, plant.period_s, x_unit),
        fingerprint=_fingerprint(plant, synthesis),
    )


@dataclass(frozen=True)
class _Order:
    """Signals in the physics' order, and the physics' places they take."""

    outputs: tuple[Signal, ...]
    inputs: tuple[Signal, ...]
    known: tuple[KnownDisturbance, ...]
    output_rows: tuple[int, ...]
    rest: Floats

    @classmethod
    def of(cls, plant: Plant, physics: PhysicsNetwork) -> _Order:
        outputs: list[Signal] = []
        inputs: list[Signal] = []
        known: list[KnownDisturbance] = []
        output_rows: list[int] = []
        rest = np.zeros(int(physics.w_at[-1]))
        for i, spec in enumerate(plant.sections):
            kind = PHYSICS[spec.physics]
            by_name = {signal.name: signal for signal in spec.signals}
            for k, name in enumerate(kind.output_names):
                if name in by_name:
                    outputs.append(by_name[name])
                    output_rows.append(int(physics.y_at[i]) + k)
            inputs.extend(by_name[name] for name in kind.input_names)
            for k, name in enumerate(kind.disturbance_names):
                place = int(physics.w_at[i]) + k
                if name in by_name:
                    rest[place] = by_name[name].scale.to_physics(by_name[name].rest)
                    if by_name[name].role is Role.MEASURED_DISTURBANCE:
                        known.append(KnownDisturbance(by_name[name], place))
        return cls(tuple(outputs), tuple(inputs), tuple(known), tuple(output_rows), rest)


def _operating_point(physics: PhysicsNetwork, order: _Order) -> OperatingPoint:
    """Outputs at their targets (mid-span without one), disturbances at rest."""
    targets = np.full(int(physics.y_at[-1]), np.nan)
    for row, signal in zip(order.output_rows, order.outputs, strict=True):
        middle = (signal.span[0] + signal.span[1]) / 2
        targets[row] = signal.scale.to_physics(middle if signal.target is None else signal.target)
    u = np.array([signal.scale.to_physics((signal.span[0] + signal.span[1]) / 2) for signal in order.inputs])
    x = physics.guess(targets, u)
    scale = np.maximum(np.abs(x), 1e-9)
    return equilibrium(physics.derivative, physics.outputs, targets, OperatingPoint(x, u, order.rest), scale=scale)


def _jacobians(physics: PhysicsNetwork, point: OperatingPoint) -> tuple[sparse.csr_array, ...]:
    """Continuous A, B, E and C at the operating point, SI."""
    pattern_x = _block_pattern(physics, physics.x_at)
    pattern_u = _block_pattern(physics, physics.u_at)
    pattern_w = _block_pattern(physics, physics.w_at)
    pattern_y = block_diagonal(
        [np.ones((p, n)) for p, n in zip(np.diff(physics.y_at), np.diff(physics.x_at), strict=True)]
    )
    x, u, w = point.x, point.u, point.w
    return (
        jacobian(lambda v: physics.derivative(v, u, w), x, colour_columns(pattern_x), pattern_x),
        jacobian(lambda v: physics.derivative(x, v, w), u, colour_columns(pattern_u), pattern_u),
        jacobian(lambda v: physics.derivative(x, u, v), w, colour_columns(pattern_w), pattern_w),
        jacobian(physics.outputs, x, colour_columns(pattern_y), pattern_y),
    )


def _block_pattern(physics: PhysicsNetwork, at: Ints) -> sparse.csr_array:
    """Where dx/dt can depend on the columns `at`: a section on itself and on its neighbours."""
    size = len(physics.x_at) - 1
    touching = sparse.lil_array((size, size))
    touching.setdiag(1.0)
    for one, other in physics.pairs:
        touching[one, other] = touching[other, one] = 1.0
    coo = touching.tocoo()
    rows, columns = [], []
    for i, j in zip(*coo.coords, strict=True):
        grid = np.meshgrid(np.arange(physics.x_at[i], physics.x_at[i + 1]), np.arange(at[j], at[j + 1]), indexing="ij")
        rows.append(grid[0].reshape(-1))
        columns.append(grid[1].reshape(-1))
    place = (np.concatenate(rows), np.concatenate(columns))
    return sparse.csr_array((np.ones(len(place[0])), place), shape=(int(physics.x_at[-1]), int(at[-1])))


def _state_units(c: sparse.csr_array, y_width: Floats, x: Floats) -> Floats:
    unit = np.where(np.abs(x) > 0, np.abs(x), 1.0)
    for row in range(c.shape[0]):
        shown = c.indices[c.indptr[row] : c.indptr[row + 1]]
        if len(shown) == 1:
            unit[shown[0]] = y_width[row] / abs(c[row, shown[0]])
    return unit


def _disturbance_units(e: sparse.csr_array, x_unit: Floats) -> Floats:
    reach = np.abs(sparse.diags_array(1 / x_unit) @ e).max(axis=0).toarray().reshape(-1)
    return np.where(reach > 0, 1 / np.where(reach > 0, reach, 1.0), 1.0)


def _scaled_network(
    plant: Plant,
    physics: PhysicsNetwork,
    order: _Order,
    matrices: tuple[sparse.csr_array, ...],
    units: tuple[Floats, ...],
) -> Network:
    a, b, e, c = matrices
    x_unit, u_unit, w_unit, y_unit = units
    names = [spec.name for spec in plant.sections]
    into_x = sparse.diags_array(1 / x_unit)

    def sizes(at: Ints) -> dict[str, int]:
        return dict(zip(names, (int(size) for size in np.diff(at)), strict=True))

    measured = dict.fromkeys(names, 0)
    for signal in order.outputs:
        measured[signal.section] += 1
    return Network.from_matrices(
        into_x @ a @ sparse.diags_array(x_unit),
        into_x @ b @ sparse.diags_array(u_unit),
        states=sizes(physics.x_at),
        inputs=sizes(physics.u_at),
        c=sparse.diags_array(1 / y_unit) @ c[list(order.output_rows)] @ sparse.diags_array(x_unit),
        outputs=measured,
        e=into_x @ e @ sparse.diags_array(w_unit),
        disturbances=sizes(physics.w_at),
    )


def _quantities(plant: Plant, order: _Order) -> list[Quantity]:
    """Rows of a plant: measured signals priced at their targets, driven ones limited, moves priced and limited."""
    weights, ts = plant.controller.weights, plant.period_s
    at_outputs = _places(order.outputs)
    at_inputs = _places(order.inputs)
    quantities = []
    for signal, (k, count) in zip(order.outputs, at_outputs, strict=True):
        zero = (signal.span[0] + signal.span[1]) / 2 if signal.target is None else signal.target
        quantities.append(
            Quantity(
                name=signal.tag,
                section=signal.section,
                of=Of.OUTPUT,
                mix=_unit(k, count),
                weight=weights.output,
                price=signal.price,
                soft=((signal.soft[0] - zero) / signal.width, (signal.soft[1] - zero) / signal.width),
                soft_price=signal.soft_price,
            )
        )
    for signal, (k, count) in zip(order.inputs, at_inputs, strict=True):
        quantities.append(
            Quantity(name=signal.tag, section=signal.section, of=Of.INPUT, mix=_unit(k, count), weight=weights.input)
        )
        most = signal.rate_per_s * ts / signal.width
        quantities.append(
            Quantity(
                name=move_of(signal),
                section=signal.section,
                of=Of.MOVE,
                mix=_unit(k, count),
                weight=weights.move,
                price=signal.move_price,
                hard=(-most, most),
            )
        )
    return quantities


def move_of(signal: Signal) -> str:
    """Name of the quantity that is a driven signal's move."""
    return f"{signal.tag} move"


def _places(signals: tuple[Signal, ...]) -> list[tuple[int, int]]:
    """Place of every signal among those of its section, and how many there are."""
    counts: dict[str, int] = {}
    places = []
    for signal in signals:
        places.append(counts.get(signal.section, 0))
        counts[signal.section] = places[-1] + 1
    return [(place, counts[signal.section]) for place, signal in zip(places, signals, strict=True)]


def _unit(k: int, count: int) -> tuple[float, ...]:
    return tuple(1.0 if j == k else 0.0 for j in range(count))


def _scaling(order: _Order, physics: PhysicsNetwork, point: OperatingPoint, x_unit: Floats, w_unit: Floats) -> Scaling:
    y = physics.outputs(point.x)
    return Scaling(
        x_zero=point.x,
        x_unit=x_unit,
        y_zero=np.array(
            [s.scale.to_engineering(float(y[row])) for s, row in zip(order.outputs, order.output_rows, strict=True)]
        ),
        y_width=np.array([signal.width for signal in order.outputs]),
        u_zero=np.array([s.scale.to_engineering(float(value)) for s, value in zip(order.inputs, point.u, strict=True)]),
        u_width=np.array([signal.width for signal in order.inputs]),
        w_zero=point.w,
        w_unit=w_unit,
    )


def _fingerprint(plant: Plant, synthesis: Design) -> str:
    """Hash of the canonical plant file and of what its design depends on besides: settings, shape, our version.

    The numbers of the design follow from these. They are left out, because their last digits are the machine's own.
    """
    digest = hashlib.sha256(canonical(plant))
    digest.update(json.dumps(asdict(synthesis.settings), sort_keys=True).encode())
    for array in (synthesis.flat.touched, synthesis.flat.at, synthesis.flat.freedom):
        digest.update(array.tobytes())
    digest.update(version("lengthsman").encode())
    return digest.hexdigest()[:16]
