from google.protobuf.internal import containers as _containers
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Iterable as _Iterable, Mapping as _Mapping, Optional as _Optional, Union as _Union

DESCRIPTOR: _descriptor.FileDescriptor

class Covariance(_message.Message):
    __slots__ = ["east_m2", "east_north_m2", "north_m2"]
    EAST_M2_FIELD_NUMBER: _ClassVar[int]
    EAST_NORTH_M2_FIELD_NUMBER: _ClassVar[int]
    NORTH_M2_FIELD_NUMBER: _ClassVar[int]
    east_m2: float
    east_north_m2: float
    north_m2: float
    def __init__(self, east_m2: _Optional[float] = ..., east_north_m2: _Optional[float] = ..., north_m2: _Optional[float] = ...) -> None: ...

class Polygon(_message.Message):
    __slots__ = ["rings"]
    RINGS_FIELD_NUMBER: _ClassVar[int]
    rings: _containers.RepeatedCompositeFieldContainer[Ring]
    def __init__(self, rings: _Optional[_Iterable[_Union[Ring, _Mapping]]] = ...) -> None: ...

class Position(_message.Message):
    __slots__ = ["lat", "lon"]
    LAT_FIELD_NUMBER: _ClassVar[int]
    LON_FIELD_NUMBER: _ClassVar[int]
    lat: float
    lon: float
    def __init__(self, lon: _Optional[float] = ..., lat: _Optional[float] = ...) -> None: ...

class Ring(_message.Message):
    __slots__ = ["points"]
    POINTS_FIELD_NUMBER: _ClassVar[int]
    points: _containers.RepeatedCompositeFieldContainer[Position]
    def __init__(self, points: _Optional[_Iterable[_Union[Position, _Mapping]]] = ...) -> None: ...
