"""What the reader and all filters share: settings, ports, and errors that end in one line."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, ClassVar

from vtkmodules.util.vtkAlgorithm import VTKPythonAlgorithmBase
from vtkmodules.vtkCommonCore import vtkOutputWindow
from vtkmodules.vtkCommonDataModel import vtkDataObject
from vtkmodules.vtkCommonExecutionModel import vtkAlgorithm, vtkStreamingDemandDrivenPipeline

from fieldviz.errors import FieldvizError
from fieldviz.filters.ranks import Ranks

__all__ = ["SNAPSHOT", "FieldvizAlgorithm", "Setting", "given_range", "given_value"]

SNAPSHOT = ("vtkCompositeDataSet", "vtkStructuredGrid")


@dataclass(frozen=True)
class Setting:
    """One setting of an algorithm.

    Attributes
    ----------
    default : int, float, str or tuple
        Its type is what values are turned into.
    choices : tuple of str
        The words it may be; any value without them.
    """

    default: Any
    choices: tuple[str, ...] = ()

    def turned(self, name: str, values: Sequence[Any]) -> Any:
        """Values as a program hands them over, in the type of the default."""
        if isinstance(self.default, tuple):
            given = values[0] if len(values) == 1 else values
            return tuple(type(self.default[0])(value) for value in given)
        value = values[0]
        if isinstance(self.default, str):
            value = "" if value is None else str(value)
            if self.choices and value not in self.choices:
                raise FieldvizError(
                    f"Cannot set {name}: expected one of {', '.join(self.choices)}, got "
                    f"'{value}'; name one of these."
                )
            return value
        return type(self.default)(value)


def _accessors(name: str) -> tuple[Callable[..., None], Callable[..., Any]]:
    def put(self: FieldvizAlgorithm, *values: Any) -> None:
        value = self.SETTINGS[name].turned(name, values)
        if self.settings[name] != value:
            self.settings[name] = value
            self.Modified()

    def get(self: FieldvizAlgorithm) -> Any:
        return self.settings[name]

    put.__doc__, get.__doc__ = f"Set {name}.", f"Return {name}."
    return put, get


class FieldvizAlgorithm(VTKPythonAlgorithmBase):
    """A VTK algorithm whose `work` may raise: the reason is shown in one line, the output is empty.

    Subclasses name TITLE, INPUTS (types that each port takes), OPTIONAL (ports that may stay
    open), OUTPUTS and SETTINGS; every setting gets a SetNAME and a GetNAME.
    """

    TITLE: ClassVar[str] = ""
    INPUTS: ClassVar[tuple[tuple[str, ...], ...]] = (SNAPSHOT,)
    OPTIONAL: ClassVar[tuple[int, ...]] = ()
    OUTPUTS: ClassVar[tuple[str, ...]] = ("vtkMultiBlockDataSet",)
    SETTINGS: ClassVar[dict[str, Setting]] = {}

    def __init_subclass__(cls, **given: Any) -> None:
        super().__init_subclass__(**given)
        for name in cls.SETTINGS:
            put, get = _accessors(name)
            setattr(cls, f"Set{name}", put)
            setattr(cls, f"Get{name}", get)

    def __init__(self) -> None:
        super().__init__(
            nInputPorts=len(self.INPUTS),
            nOutputPorts=len(self.OUTPUTS),
            inputType=self.INPUTS[0][0] if self.INPUTS else "vtkDataObject",
            outputType=self.OUTPUTS[0],
        )
        self.settings = {name: setting.default for name, setting in self.SETTINGS.items()}
        self._last_error = ""

    def GetLastError(self) -> str:  # noqa: N802 - VTK's spelling
        """Why the last execution failed, in one line; empty if it did not."""
        return self._last_error

    def work(self, inputs: Sequence[Any], outputs: Sequence[Any]) -> None:
        """Fill the outputs; may raise. An input is None where its port is open."""
        raise NotImplementedError

    def FillInputPortInformation(self, port: int, info: Any) -> int:  # noqa: N802
        """Say what a port takes."""
        key = vtkAlgorithm.INPUT_REQUIRED_DATA_TYPE()
        info.Remove(key)
        for name in self.INPUTS[port]:
            info.Append(key, name)
        if port in self.OPTIONAL:
            info.Set(vtkAlgorithm.INPUT_IS_OPTIONAL(), 1)
        return 1

    def FillOutputPortInformation(self, port: int, info: Any) -> int:  # noqa: N802
        """Say what a port gives."""
        info.Set(vtkDataObject.DATA_TYPE_NAME(), self.OUTPUTS[port])
        return 1

    def RequestUpdateExtent(self, request: Any, in_info: Any, out_info: Any) -> int:  # noqa: N802
        """Ask for this rank's share of the first input, whoever asks, and for all of the others.

        What is asked for never depends on how far the ranks have come, so that all of them meet in
        the exchange of blocks.
        """
        ranks, pipeline = Ranks(), vtkStreamingDemandDrivenPipeline
        for port, connections in enumerate(in_info):
            share = (0, 1) if port else (ranks.rank, ranks.size)
            for n in range(connections.GetNumberOfInformationObjects()):
                info = connections.GetInformationObject(n)
                info.Set(pipeline.UPDATE_PIECE_NUMBER(), share[0])
                info.Set(pipeline.UPDATE_NUMBER_OF_PIECES(), share[1])
                info.Set(pipeline.UPDATE_NUMBER_OF_GHOST_LEVELS(), 0)
        return 1

    def RequestInformation(self, request: Any, in_info: Any, out_info: Any) -> int:  # noqa: N802
        """Say that every rank is to be asked."""
        for n in range(len(self.OUTPUTS)):
            out_info.GetInformationObject(n).Set(vtkAlgorithm.CAN_HANDLE_PIECE_REQUEST(), 1)
        return 1

    def RequestData(self, request: Any, in_info: Any, out_info: Any) -> int:  # noqa: N802
        """Do the work; whatever goes wrong ends in one line, an empty output and `LastError`."""
        inputs = [
            vtkDataObject.GetData(info, 0) if info.GetNumberOfInformationObjects() else None
            for info in in_info
        ]
        outputs = [vtkDataObject.GetData(out_info, n) for n in range(len(self.OUTPUTS))]
        if not self.guarded(lambda: self.work(inputs, outputs)):
            for output in outputs:
                output.Initialize()
            vtkOutputWindow.GetInstance().DisplayErrorText(f"{self.TITLE}: {self._last_error}\n")
        return 1

    def guarded(self, work: Callable[[], object]) -> bool:
        """Whether the work went well; if not, `LastError` says why."""
        self._last_error = ""
        try:
            work()
        except FieldvizError as error:
            self._last_error = " ".join(str(error).split())
        except MemoryError:
            self._last_error = (
                "Cannot finish: this machine's memory is used up; read fewer fields or use a "
                "smaller snapshot."
            )
        except Exception as error:  # noqa: BLE001 - an exception must not get into VTK
            place = error.__traceback__
            while place and place.tb_next:
                place = place.tb_next
            where = f"{place.tb_frame.f_globals.get('__name__')}:{place.tb_lineno}" if place else ""
            reason = " ".join(str(error).split())
            self._last_error = (
                f"Cannot finish: a fault in fieldviz, {type(error).__name__} at {where}: {reason}; "
                "please report it."
            )
        return not self._last_error


def given_range(pair: tuple[float, float]) -> tuple[float, float] | None:
    """A range, or None for 0, 0: the whole one."""
    return None if pair == (0.0, 0.0) else pair


def given_value(value: float) -> float | None:
    """A number, or None for 0: worked out."""
    return value or None
