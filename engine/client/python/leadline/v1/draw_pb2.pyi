from leadline.v1 import map_pb2 as _map_pb2
from leadline.v1 import place_pb2 as _place_pb2
from google.protobuf.internal import containers as _containers
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Iterable as _Iterable, Mapping as _Mapping, Optional as _Optional, Union as _Union

DESCRIPTOR: _descriptor.FileDescriptor

class DrawMapRequest(_message.Message):
    __slots__ = ["detail_m", "map", "north_east", "south_west"]
    DETAIL_M_FIELD_NUMBER: _ClassVar[int]
    MAP_FIELD_NUMBER: _ClassVar[int]
    NORTH_EAST_FIELD_NUMBER: _ClassVar[int]
    SOUTH_WEST_FIELD_NUMBER: _ClassVar[int]
    detail_m: float
    map: str
    north_east: _place_pb2.Position
    south_west: _place_pb2.Position
    def __init__(self, map: _Optional[str] = ..., south_west: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., north_east: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., detail_m: _Optional[float] = ...) -> None: ...

class DrawMapResponse(_message.Message):
    __slots__ = ["detail_m", "fingerprint", "kind", "left_out", "lines", "map", "origin", "relief"]
    DETAIL_M_FIELD_NUMBER: _ClassVar[int]
    FINGERPRINT_FIELD_NUMBER: _ClassVar[int]
    KIND_FIELD_NUMBER: _ClassVar[int]
    LEFT_OUT_FIELD_NUMBER: _ClassVar[int]
    LINES_FIELD_NUMBER: _ClassVar[int]
    MAP_FIELD_NUMBER: _ClassVar[int]
    ORIGIN_FIELD_NUMBER: _ClassVar[int]
    RELIEF_FIELD_NUMBER: _ClassVar[int]
    detail_m: float
    fingerprint: str
    kind: _map_pb2.MapKind
    left_out: int
    lines: _containers.RepeatedCompositeFieldContainer[RoadLine]
    map: str
    origin: _place_pb2.Position
    relief: Relief
    def __init__(self, map: _Optional[str] = ..., fingerprint: _Optional[str] = ..., kind: _Optional[_Union[_map_pb2.MapKind, str]] = ..., origin: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., detail_m: _Optional[float] = ..., left_out: _Optional[int] = ..., lines: _Optional[_Iterable[_Union[RoadLine, _Mapping]]] = ..., relief: _Optional[_Union[Relief, _Mapping]] = ...) -> None: ...

class Relief(_message.Message):
    __slots__ = ["columns", "height", "highest_m", "lowest_m", "rows", "shade", "south_m", "step_m", "west_m"]
    COLUMNS_FIELD_NUMBER: _ClassVar[int]
    HEIGHT_FIELD_NUMBER: _ClassVar[int]
    HIGHEST_M_FIELD_NUMBER: _ClassVar[int]
    LOWEST_M_FIELD_NUMBER: _ClassVar[int]
    ROWS_FIELD_NUMBER: _ClassVar[int]
    SHADE_FIELD_NUMBER: _ClassVar[int]
    SOUTH_M_FIELD_NUMBER: _ClassVar[int]
    STEP_M_FIELD_NUMBER: _ClassVar[int]
    WEST_M_FIELD_NUMBER: _ClassVar[int]
    columns: int
    height: bytes
    highest_m: float
    lowest_m: float
    rows: int
    shade: bytes
    south_m: float
    step_m: float
    west_m: float
    def __init__(self, columns: _Optional[int] = ..., rows: _Optional[int] = ..., west_m: _Optional[float] = ..., south_m: _Optional[float] = ..., step_m: _Optional[float] = ..., lowest_m: _Optional[float] = ..., highest_m: _Optional[float] = ..., height: _Optional[bytes] = ..., shade: _Optional[bytes] = ...) -> None: ...

class RoadLine(_message.Message):
    __slots__ = ["bridge", "east_cm", "edge", "name", "north_cm", "one_way", "tunnel"]
    BRIDGE_FIELD_NUMBER: _ClassVar[int]
    CLASS_FIELD_NUMBER: _ClassVar[int]
    EAST_CM_FIELD_NUMBER: _ClassVar[int]
    EDGE_FIELD_NUMBER: _ClassVar[int]
    NAME_FIELD_NUMBER: _ClassVar[int]
    NORTH_CM_FIELD_NUMBER: _ClassVar[int]
    ONE_WAY_FIELD_NUMBER: _ClassVar[int]
    TUNNEL_FIELD_NUMBER: _ClassVar[int]
    bridge: bool
    east_cm: _containers.RepeatedScalarFieldContainer[int]
    edge: int
    name: str
    north_cm: _containers.RepeatedScalarFieldContainer[int]
    one_way: bool
    tunnel: bool
    def __init__(self, edge: _Optional[int] = ..., name: _Optional[str] = ..., one_way: bool = ..., tunnel: bool = ..., bridge: bool = ..., east_cm: _Optional[_Iterable[int]] = ..., north_cm: _Optional[_Iterable[int]] = ..., **kwargs) -> None: ...
