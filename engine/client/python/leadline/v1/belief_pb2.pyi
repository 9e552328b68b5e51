from leadline.v1 import place_pb2 as _place_pb2
from google.protobuf.internal import containers as _containers
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Iterable as _Iterable, Mapping as _Mapping, Optional as _Optional, Union as _Union

DESCRIPTOR: _descriptor.FileDescriptor

class Belief(_message.Message):
    __slots__ = ["grid", "peak_mass", "rest", "stretches"]
    GRID_FIELD_NUMBER: _ClassVar[int]
    PEAK_MASS_FIELD_NUMBER: _ClassVar[int]
    REST_FIELD_NUMBER: _ClassVar[int]
    STRETCHES_FIELD_NUMBER: _ClassVar[int]
    grid: BeliefGrid
    peak_mass: float
    rest: float
    stretches: _containers.RepeatedCompositeFieldContainer[BeliefStretch]
    def __init__(self, peak_mass: _Optional[float] = ..., grid: _Optional[_Union[BeliefGrid, _Mapping]] = ..., stretches: _Optional[_Iterable[_Union[BeliefStretch, _Mapping]]] = ..., rest: _Optional[float] = ...) -> None: ...

class BeliefGrid(_message.Message):
    __slots__ = ["cell_m", "columns", "first", "first_last", "last", "last_first", "mass", "rows", "runs"]
    CELL_M_FIELD_NUMBER: _ClassVar[int]
    COLUMNS_FIELD_NUMBER: _ClassVar[int]
    FIRST_FIELD_NUMBER: _ClassVar[int]
    FIRST_LAST_FIELD_NUMBER: _ClassVar[int]
    LAST_FIELD_NUMBER: _ClassVar[int]
    LAST_FIRST_FIELD_NUMBER: _ClassVar[int]
    MASS_FIELD_NUMBER: _ClassVar[int]
    ROWS_FIELD_NUMBER: _ClassVar[int]
    RUNS_FIELD_NUMBER: _ClassVar[int]
    cell_m: float
    columns: int
    first: _place_pb2.Position
    first_last: _place_pb2.Position
    last: _place_pb2.Position
    last_first: _place_pb2.Position
    mass: bytes
    rows: int
    runs: _containers.RepeatedScalarFieldContainer[int]
    def __init__(self, columns: _Optional[int] = ..., rows: _Optional[int] = ..., first: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., first_last: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., last_first: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., last: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., mass: _Optional[bytes] = ..., cell_m: _Optional[float] = ..., runs: _Optional[_Iterable[int]] = ...) -> None: ...

class BeliefStretch(_message.Message):
    __slots__ = ["cell_m", "east_cm", "edge", "from_m", "mass", "middles", "north_cm"]
    CELL_M_FIELD_NUMBER: _ClassVar[int]
    EAST_CM_FIELD_NUMBER: _ClassVar[int]
    EDGE_FIELD_NUMBER: _ClassVar[int]
    FROM_M_FIELD_NUMBER: _ClassVar[int]
    MASS_FIELD_NUMBER: _ClassVar[int]
    MIDDLES_FIELD_NUMBER: _ClassVar[int]
    NORTH_CM_FIELD_NUMBER: _ClassVar[int]
    cell_m: float
    east_cm: _containers.RepeatedScalarFieldContainer[int]
    edge: int
    from_m: float
    mass: bytes
    middles: _containers.RepeatedCompositeFieldContainer[_place_pb2.Position]
    north_cm: _containers.RepeatedScalarFieldContainer[int]
    def __init__(self, edge: _Optional[int] = ..., from_m: _Optional[float] = ..., cell_m: _Optional[float] = ..., mass: _Optional[bytes] = ..., middles: _Optional[_Iterable[_Union[_place_pb2.Position, _Mapping]]] = ..., east_cm: _Optional[_Iterable[int]] = ..., north_cm: _Optional[_Iterable[int]] = ...) -> None: ...
