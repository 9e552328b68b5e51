from leadline.v1 import place_pb2 as _place_pb2
from google.protobuf.internal import containers as _containers
from google.protobuf.internal import enum_type_wrapper as _enum_type_wrapper
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Iterable as _Iterable, Mapping as _Mapping, Optional as _Optional, Union as _Union

DESCRIPTOR: _descriptor.FileDescriptor
MAP_KIND_HEIGHTS: MapKind
MAP_KIND_ROADS: MapKind
MAP_KIND_UNSPECIFIED: MapKind

class DescribeMapRequest(_message.Message):
    __slots__ = ["check", "map"]
    CHECK_FIELD_NUMBER: _ClassVar[int]
    MAP_FIELD_NUMBER: _ClassVar[int]
    check: bool
    map: str
    def __init__(self, map: _Optional[str] = ..., check: bool = ...) -> None: ...

class DescribeMapResponse(_message.Message):
    __slots__ = ["check", "map"]
    CHECK_FIELD_NUMBER: _ClassVar[int]
    MAP_FIELD_NUMBER: _ClassVar[int]
    check: str
    map: MapDescription
    def __init__(self, map: _Optional[_Union[MapDescription, _Mapping]] = ..., check: _Optional[str] = ...) -> None: ...

class DescribeSuiteRequest(_message.Message):
    __slots__ = ["kind", "suite"]
    KIND_FIELD_NUMBER: _ClassVar[int]
    SUITE_FIELD_NUMBER: _ClassVar[int]
    kind: MapKind
    suite: str
    def __init__(self, suite: _Optional[str] = ..., kind: _Optional[_Union[MapKind, str]] = ...) -> None: ...

class DescribeSuiteResponse(_message.Message):
    __slots__ = ["fingerprint", "name", "yaml"]
    FINGERPRINT_FIELD_NUMBER: _ClassVar[int]
    NAME_FIELD_NUMBER: _ClassVar[int]
    YAML_FIELD_NUMBER: _ClassVar[int]
    fingerprint: str
    name: str
    yaml: str
    def __init__(self, name: _Optional[str] = ..., yaml: _Optional[str] = ..., fingerprint: _Optional[str] = ...) -> None: ...

class ListMapsRequest(_message.Message):
    __slots__ = []
    def __init__(self) -> None: ...

class ListMapsResponse(_message.Message):
    __slots__ = ["maps"]
    MAPS_FIELD_NUMBER: _ClassVar[int]
    maps: _containers.RepeatedCompositeFieldContainer[MapDescription]
    def __init__(self, maps: _Optional[_Iterable[_Union[MapDescription, _Mapping]]] = ...) -> None: ...

class ListSuitesRequest(_message.Message):
    __slots__ = []
    def __init__(self) -> None: ...

class ListSuitesResponse(_message.Message):
    __slots__ = ["suites"]
    SUITES_FIELD_NUMBER: _ClassVar[int]
    suites: _containers.RepeatedScalarFieldContainer[str]
    def __init__(self, suites: _Optional[_Iterable[str]] = ...) -> None: ...

class MapBeginning(_message.Message):
    __slots__ = ["bytes", "kind", "name", "replace", "sha256"]
    BYTES_FIELD_NUMBER: _ClassVar[int]
    KIND_FIELD_NUMBER: _ClassVar[int]
    NAME_FIELD_NUMBER: _ClassVar[int]
    REPLACE_FIELD_NUMBER: _ClassVar[int]
    SHA256_FIELD_NUMBER: _ClassVar[int]
    bytes: int
    kind: MapKind
    name: str
    replace: bool
    sha256: str
    def __init__(self, name: _Optional[str] = ..., kind: _Optional[_Union[MapKind, str]] = ..., bytes: _Optional[int] = ..., sha256: _Optional[str] = ..., replace: bool = ...) -> None: ...

class MapDescription(_message.Message):
    __slots__ = ["columns", "edges", "fingerprint", "frame", "height_sigma_m", "kind", "length_m", "licence", "name", "north_east", "older_sessions", "rows", "sessions", "source", "south_west", "spacing_m", "vertical_datum"]
    COLUMNS_FIELD_NUMBER: _ClassVar[int]
    EDGES_FIELD_NUMBER: _ClassVar[int]
    FINGERPRINT_FIELD_NUMBER: _ClassVar[int]
    FRAME_FIELD_NUMBER: _ClassVar[int]
    HEIGHT_SIGMA_M_FIELD_NUMBER: _ClassVar[int]
    KIND_FIELD_NUMBER: _ClassVar[int]
    LENGTH_M_FIELD_NUMBER: _ClassVar[int]
    LICENCE_FIELD_NUMBER: _ClassVar[int]
    NAME_FIELD_NUMBER: _ClassVar[int]
    NORTH_EAST_FIELD_NUMBER: _ClassVar[int]
    OLDER_SESSIONS_FIELD_NUMBER: _ClassVar[int]
    ROWS_FIELD_NUMBER: _ClassVar[int]
    SESSIONS_FIELD_NUMBER: _ClassVar[int]
    SOURCE_FIELD_NUMBER: _ClassVar[int]
    SOUTH_WEST_FIELD_NUMBER: _ClassVar[int]
    SPACING_M_FIELD_NUMBER: _ClassVar[int]
    VERTICAL_DATUM_FIELD_NUMBER: _ClassVar[int]
    columns: int
    edges: int
    fingerprint: str
    frame: str
    height_sigma_m: float
    kind: MapKind
    length_m: float
    licence: str
    name: str
    north_east: _place_pb2.Position
    older_sessions: int
    rows: int
    sessions: int
    source: str
    south_west: _place_pb2.Position
    spacing_m: float
    vertical_datum: str
    def __init__(self, name: _Optional[str] = ..., fingerprint: _Optional[str] = ..., kind: _Optional[_Union[MapKind, str]] = ..., south_west: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., north_east: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., source: _Optional[str] = ..., licence: _Optional[str] = ..., vertical_datum: _Optional[str] = ..., frame: _Optional[str] = ..., edges: _Optional[int] = ..., length_m: _Optional[float] = ..., columns: _Optional[int] = ..., rows: _Optional[int] = ..., spacing_m: _Optional[float] = ..., height_sigma_m: _Optional[float] = ..., sessions: _Optional[int] = ..., older_sessions: _Optional[int] = ...) -> None: ...

class MapPart(_message.Message):
    __slots__ = ["chunk", "offset", "upload"]
    CHUNK_FIELD_NUMBER: _ClassVar[int]
    OFFSET_FIELD_NUMBER: _ClassVar[int]
    UPLOAD_FIELD_NUMBER: _ClassVar[int]
    chunk: bytes
    offset: int
    upload: str
    def __init__(self, upload: _Optional[str] = ..., offset: _Optional[int] = ..., chunk: _Optional[bytes] = ...) -> None: ...

class UploadMapPartRequest(_message.Message):
    __slots__ = ["beginning", "give_up", "part"]
    BEGINNING_FIELD_NUMBER: _ClassVar[int]
    GIVE_UP_FIELD_NUMBER: _ClassVar[int]
    PART_FIELD_NUMBER: _ClassVar[int]
    beginning: MapBeginning
    give_up: str
    part: MapPart
    def __init__(self, beginning: _Optional[_Union[MapBeginning, _Mapping]] = ..., part: _Optional[_Union[MapPart, _Mapping]] = ..., give_up: _Optional[str] = ...) -> None: ...

class UploadMapPartResponse(_message.Message):
    __slots__ = ["map", "received", "upload"]
    MAP_FIELD_NUMBER: _ClassVar[int]
    RECEIVED_FIELD_NUMBER: _ClassVar[int]
    UPLOAD_FIELD_NUMBER: _ClassVar[int]
    map: MapDescription
    received: int
    upload: str
    def __init__(self, upload: _Optional[str] = ..., received: _Optional[int] = ..., map: _Optional[_Union[MapDescription, _Mapping]] = ...) -> None: ...

class UploadMapRequest(_message.Message):
    __slots__ = ["beginning", "chunk"]
    BEGINNING_FIELD_NUMBER: _ClassVar[int]
    CHUNK_FIELD_NUMBER: _ClassVar[int]
    beginning: MapBeginning
    chunk: bytes
    def __init__(self, beginning: _Optional[_Union[MapBeginning, _Mapping]] = ..., chunk: _Optional[bytes] = ...) -> None: ...

class UploadMapResponse(_message.Message):
    __slots__ = ["map"]
    MAP_FIELD_NUMBER: _ClassVar[int]
    map: MapDescription
    def __init__(self, map: _Optional[_Union[MapDescription, _Mapping]] = ...) -> None: ...

class MapKind(int, metaclass=_enum_type_wrapper.EnumTypeWrapper):
    __slots__ = []
