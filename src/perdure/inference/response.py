"""Kernels as PyTensor operations: the only file that knows both."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytensor.tensor as pt
from pytensor.gradient import disconnected_type
from pytensor.graph.basic import Apply, Variable
from pytensor.graph.op import Op

from perdure.inference.readings import predict_readings
from perdure.inference.structure import Readings
from perdure.rheology.law import Law


class ReadingsOp(Op):
    """PyTensor face of :func:`predict_readings`: outputs the readings and the derivatives that its pullback reuses."""

    __props__ = ("law", "readings")

    def __init__(self, law: Law, readings: Readings) -> None:
        self.law = law
        self.readings = readings

    def make_node(self, *inputs: Any) -> Apply[Any]:
        """Inputs: natural (R, K), log gain (R,), coefficient (R,)."""
        variables = [pt.as_tensor_variable(value, dtype="float64") for value in inputs]
        return Apply(self, variables, [pt.dvector(), pt.dmatrix(), pt.dvector()])

    def perform(self, node: Apply[Any], inputs: Any, output_storage: Any) -> None:  # noqa: ARG002 - PyTensor's signature
        """Evaluate the kernel."""
        natural, log_gain, coefficient = (np.ascontiguousarray(value, dtype=np.float64) for value in inputs)
        predicted = predict_readings(self.law, self.readings, natural, log_gain, coefficient)
        output_storage[0][0] = predicted.value
        output_storage[1][0] = predicted.by_natural
        output_storage[2][0] = predicted.by_coefficient

    def connection_pattern(self, node: Apply[Any]) -> list[list[bool]]:  # noqa: ARG002 - PyTensor's signature
        """Only the readings are differentiable outputs."""
        return [[True, False, False]] * 3

    def pullback(self, inputs: Any, outputs: Any, cotangents: Any) -> list[Variable[Any, Any]]:  # noqa: ARG002 - PyTensor's signature
        """Cotangents of natural, log gain and coefficient; what several readings of a record say is added up."""
        value, by_natural, by_coefficient = outputs
        c = cotangents[0]
        run = pt.as_tensor_variable(self.readings.run)
        runs = self.readings.reference_knot.size
        natural = pt.zeros((runs, by_natural.shape[1]))[run].inc(c[:, None] * by_natural)
        gain = pt.zeros(runs)[run].inc(c * value)
        coefficient = pt.zeros(runs)[run].inc(c * by_coefficient)
        return [natural, gain, coefficient]


def respond(law: Law, readings: Readings, natural: Any, log_gain: Any, coefficient: Any) -> Variable[Any, Any]:
    """Predicted readings (N,) for natural parameters (R, K), log gain (R,) and coefficient (R,) of each record."""
    return ReadingsOp(law, readings).make_node(natural, log_gain, coefficient).outputs[0]


class NaturalOp(Op):
    """PyTensor face of ``law.natural``: shape coordinates (C,) and modes (S, M) to natural parameters (S, K)."""

    __props__ = ("law",)

    def __init__(self, law: Law) -> None:
        self.law = law

    def make_node(self, *inputs: Any) -> Apply[Any]:
        """Shape (C,) and modes (S, M) in; one matrix out."""
        variables = [pt.as_tensor_variable(value, dtype="float64") for value in inputs]
        return Apply(self, variables, [pt.dmatrix()])

    def perform(self, node: Apply[Any], inputs: Any, output_storage: Any) -> None:  # noqa: ARG002 - PyTensor's signature
        """Evaluate the law's map."""
        output_storage[0][0] = self.law.natural(inputs[0], inputs[1])

    def pullback(self, inputs: Any, outputs: Any, cotangents: Any) -> list[Variable[Any, Any]]:  # noqa: ARG002 - PyTensor's signature
        """Through :class:`NaturalPullbackOp`."""
        node = NaturalPullbackOp(self.law).make_node(*inputs, cotangents[0])
        return list(node.outputs)


class NaturalPullbackOp(Op):
    """PyTensor face of ``law.natural_pullback``."""

    __props__ = ("law",)

    def __init__(self, law: Law) -> None:
        self.law = law

    def make_node(self, *inputs: Any) -> Apply[Any]:
        """Shape, modes and the cotangent of the natural parameters in; cotangents of shape and modes out."""
        variables = [pt.as_tensor_variable(value, dtype="float64") for value in inputs]
        return Apply(self, variables, [pt.dvector(), pt.dmatrix()])

    def perform(self, node: Apply[Any], inputs: Any, output_storage: Any) -> None:  # noqa: ARG002 - PyTensor's signature
        """Evaluate the law's pullback."""
        to_shape, to_modes = self.law.natural_pullback(*inputs)
        output_storage[0][0] = np.asarray(to_shape)
        output_storage[1][0] = np.asarray(to_modes)

    def pullback(self, inputs: Any, outputs: Any, cotangents: Any) -> list[Variable[Any, Any]]:  # noqa: ARG002 - PyTensor's signature
        """First derivatives are all that sampling needs."""
        return [disconnected_type() for _ in inputs]
