from google.protobuf import timestamp_pb2 as _timestamp_pb2
from leadline.v1 import place_pb2 as _place_pb2
from google.protobuf.internal import containers as _containers
from google.protobuf.internal import enum_type_wrapper as _enum_type_wrapper
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Iterable as _Iterable, Mapping as _Mapping, Optional as _Optional, Union as _Union

DESCRIPTOR: _descriptor.FileDescriptor
TRAFFIC_DOUBT_KIND_AMBIGUOUS_SIDE: TrafficDoubtKind
TRAFFIC_DOUBT_KIND_CROWDED: TrafficDoubtKind
TRAFFIC_DOUBT_KIND_IN_LINE: TrafficDoubtKind
TRAFFIC_DOUBT_KIND_OUT_OF_REACH: TrafficDoubtKind
TRAFFIC_DOUBT_KIND_OVER_BUDGET: TrafficDoubtKind
TRAFFIC_DOUBT_KIND_SILENT: TrafficDoubtKind
TRAFFIC_DOUBT_KIND_UNKNOWN_POST: TrafficDoubtKind
TRAFFIC_DOUBT_KIND_UNSPECIFIED: TrafficDoubtKind

class CountedLine(_message.Message):
    __slots__ = ["at", "at_m", "name"]
    AT_FIELD_NUMBER: _ClassVar[int]
    AT_M_FIELD_NUMBER: _ClassVar[int]
    NAME_FIELD_NUMBER: _ClassVar[int]
    at: _place_pb2.Position
    at_m: float
    name: str
    def __init__(self, name: _Optional[str] = ..., at_m: _Optional[float] = ..., at: _Optional[_Union[_place_pb2.Position, _Mapping]] = ...) -> None: ...

class FollowTrafficRequest(_message.Message):
    __slots__ = ["min_interval_s", "traffic"]
    MIN_INTERVAL_S_FIELD_NUMBER: _ClassVar[int]
    TRAFFIC_FIELD_NUMBER: _ClassVar[int]
    min_interval_s: float
    traffic: TrafficRequest
    def __init__(self, traffic: _Optional[_Union[TrafficRequest, _Mapping]] = ..., min_interval_s: _Optional[float] = ...) -> None: ...

class FollowTrafficResponse(_message.Message):
    __slots__ = ["drive", "picture", "shape"]
    DRIVE_FIELD_NUMBER: _ClassVar[int]
    PICTURE_FIELD_NUMBER: _ClassVar[int]
    SHAPE_FIELD_NUMBER: _ClassVar[int]
    drive: str
    picture: TrafficPicture
    shape: RoadShape
    def __init__(self, drive: _Optional[str] = ..., picture: _Optional[_Union[TrafficPicture, _Mapping]] = ..., shape: _Optional[_Union[RoadShape, _Mapping]] = ...) -> None: ...

class HeardVehicle(_message.Message):
    __slots__ = ["existence", "forward", "heading_deg", "label", "mean", "position_m", "position_sigma_m", "speed_mps", "speed_sigma_mps"]
    EXISTENCE_FIELD_NUMBER: _ClassVar[int]
    FORWARD_FIELD_NUMBER: _ClassVar[int]
    HEADING_DEG_FIELD_NUMBER: _ClassVar[int]
    LABEL_FIELD_NUMBER: _ClassVar[int]
    MEAN_FIELD_NUMBER: _ClassVar[int]
    POSITION_M_FIELD_NUMBER: _ClassVar[int]
    POSITION_SIGMA_M_FIELD_NUMBER: _ClassVar[int]
    SPEED_MPS_FIELD_NUMBER: _ClassVar[int]
    SPEED_SIGMA_MPS_FIELD_NUMBER: _ClassVar[int]
    existence: float
    forward: float
    heading_deg: float
    label: int
    mean: _place_pb2.Position
    position_m: float
    position_sigma_m: float
    speed_mps: float
    speed_sigma_mps: float
    def __init__(self, label: _Optional[int] = ..., existence: _Optional[float] = ..., position_m: _Optional[float] = ..., position_sigma_m: _Optional[float] = ..., speed_mps: _Optional[float] = ..., speed_sigma_mps: _Optional[float] = ..., forward: _Optional[float] = ..., mean: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., heading_deg: _Optional[float] = ...) -> None: ...

class LineCount(_message.Message):
    __slots__ = ["at_m", "backward", "backward_per_hour", "expected_backward", "expected_forward", "flow_s", "forward", "forward_per_hour", "name", "recent"]
    AT_M_FIELD_NUMBER: _ClassVar[int]
    BACKWARD_FIELD_NUMBER: _ClassVar[int]
    BACKWARD_PER_HOUR_FIELD_NUMBER: _ClassVar[int]
    EXPECTED_BACKWARD_FIELD_NUMBER: _ClassVar[int]
    EXPECTED_FORWARD_FIELD_NUMBER: _ClassVar[int]
    FLOW_S_FIELD_NUMBER: _ClassVar[int]
    FORWARD_FIELD_NUMBER: _ClassVar[int]
    FORWARD_PER_HOUR_FIELD_NUMBER: _ClassVar[int]
    NAME_FIELD_NUMBER: _ClassVar[int]
    RECENT_FIELD_NUMBER: _ClassVar[int]
    at_m: float
    backward: int
    backward_per_hour: float
    expected_backward: float
    expected_forward: float
    flow_s: float
    forward: int
    forward_per_hour: float
    name: str
    recent: _containers.RepeatedCompositeFieldContainer[LinePassage]
    def __init__(self, name: _Optional[str] = ..., at_m: _Optional[float] = ..., forward: _Optional[int] = ..., backward: _Optional[int] = ..., expected_forward: _Optional[float] = ..., expected_backward: _Optional[float] = ..., forward_per_hour: _Optional[float] = ..., backward_per_hour: _Optional[float] = ..., flow_s: _Optional[float] = ..., recent: _Optional[_Iterable[_Union[LinePassage, _Mapping]]] = ...) -> None: ...

class LinePassage(_message.Message):
    __slots__ = ["existence", "forward", "label", "time"]
    EXISTENCE_FIELD_NUMBER: _ClassVar[int]
    FORWARD_FIELD_NUMBER: _ClassVar[int]
    LABEL_FIELD_NUMBER: _ClassVar[int]
    TIME_FIELD_NUMBER: _ClassVar[int]
    existence: float
    forward: bool
    label: int
    time: _timestamp_pb2.Timestamp
    def __init__(self, time: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., label: _Optional[int] = ..., forward: bool = ..., existence: _Optional[float] = ...) -> None: ...

class RoadPost(_message.Message):
    __slots__ = ["at", "axis_deg", "post", "reach_m"]
    AT_FIELD_NUMBER: _ClassVar[int]
    AXIS_DEG_FIELD_NUMBER: _ClassVar[int]
    POST_FIELD_NUMBER: _ClassVar[int]
    REACH_M_FIELD_NUMBER: _ClassVar[int]
    at: _place_pb2.Position
    axis_deg: float
    post: str
    reach_m: float
    def __init__(self, post: _Optional[str] = ..., at: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., reach_m: _Optional[float] = ..., axis_deg: _Optional[float] = ...) -> None: ...

class RoadShape(_message.Message):
    __slots__ = ["centreline", "length_m", "lines", "posts"]
    CENTRELINE_FIELD_NUMBER: _ClassVar[int]
    LENGTH_M_FIELD_NUMBER: _ClassVar[int]
    LINES_FIELD_NUMBER: _ClassVar[int]
    POSTS_FIELD_NUMBER: _ClassVar[int]
    centreline: _containers.RepeatedCompositeFieldContainer[_place_pb2.Position]
    length_m: float
    lines: _containers.RepeatedCompositeFieldContainer[CountedLine]
    posts: _containers.RepeatedCompositeFieldContainer[RoadPost]
    def __init__(self, centreline: _Optional[_Iterable[_Union[_place_pb2.Position, _Mapping]]] = ..., length_m: _Optional[float] = ..., posts: _Optional[_Iterable[_Union[RoadPost, _Mapping]]] = ..., lines: _Optional[_Iterable[_Union[CountedLine, _Mapping]]] = ...) -> None: ...

class TrafficDoubt(_message.Message):
    __slots__ = ["count", "detail", "kind", "post"]
    COUNT_FIELD_NUMBER: _ClassVar[int]
    DETAIL_FIELD_NUMBER: _ClassVar[int]
    KIND_FIELD_NUMBER: _ClassVar[int]
    POST_FIELD_NUMBER: _ClassVar[int]
    count: int
    detail: str
    kind: TrafficDoubtKind
    post: str
    def __init__(self, kind: _Optional[_Union[TrafficDoubtKind, str]] = ..., post: _Optional[str] = ..., count: _Optional[int] = ..., detail: _Optional[str] = ...) -> None: ...

class TrafficPicture(_message.Message):
    __slots__ = ["accepted", "age_s", "doubts", "durable", "ended", "expected", "intensity_per_km", "lines", "recomputed", "refused", "state_sha256", "time", "unlabelled", "vehicles"]
    ACCEPTED_FIELD_NUMBER: _ClassVar[int]
    AGE_S_FIELD_NUMBER: _ClassVar[int]
    DOUBTS_FIELD_NUMBER: _ClassVar[int]
    DURABLE_FIELD_NUMBER: _ClassVar[int]
    ENDED_FIELD_NUMBER: _ClassVar[int]
    EXPECTED_FIELD_NUMBER: _ClassVar[int]
    INTENSITY_PER_KM_FIELD_NUMBER: _ClassVar[int]
    LINES_FIELD_NUMBER: _ClassVar[int]
    RECOMPUTED_FIELD_NUMBER: _ClassVar[int]
    REFUSED_FIELD_NUMBER: _ClassVar[int]
    STATE_SHA256_FIELD_NUMBER: _ClassVar[int]
    TIME_FIELD_NUMBER: _ClassVar[int]
    UNLABELLED_FIELD_NUMBER: _ClassVar[int]
    VEHICLES_FIELD_NUMBER: _ClassVar[int]
    accepted: int
    age_s: float
    doubts: _containers.RepeatedCompositeFieldContainer[TrafficDoubt]
    durable: bool
    ended: bool
    expected: float
    intensity_per_km: _containers.RepeatedScalarFieldContainer[float]
    lines: _containers.RepeatedCompositeFieldContainer[LineCount]
    recomputed: bool
    refused: int
    state_sha256: str
    time: _timestamp_pb2.Timestamp
    unlabelled: float
    vehicles: _containers.RepeatedCompositeFieldContainer[HeardVehicle]
    def __init__(self, time: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., age_s: _Optional[float] = ..., vehicles: _Optional[_Iterable[_Union[HeardVehicle, _Mapping]]] = ..., expected: _Optional[float] = ..., unlabelled: _Optional[float] = ..., lines: _Optional[_Iterable[_Union[LineCount, _Mapping]]] = ..., intensity_per_km: _Optional[_Iterable[float]] = ..., doubts: _Optional[_Iterable[_Union[TrafficDoubt, _Mapping]]] = ..., accepted: _Optional[int] = ..., refused: _Optional[int] = ..., ended: bool = ..., state_sha256: _Optional[str] = ..., recomputed: bool = ..., durable: bool = ...) -> None: ...

class TrafficRequest(_message.Message):
    __slots__ = ["flow_s", "least_existence", "parts", "road", "shape"]
    FLOW_S_FIELD_NUMBER: _ClassVar[int]
    LEAST_EXISTENCE_FIELD_NUMBER: _ClassVar[int]
    PARTS_FIELD_NUMBER: _ClassVar[int]
    ROAD_FIELD_NUMBER: _ClassVar[int]
    SHAPE_FIELD_NUMBER: _ClassVar[int]
    flow_s: float
    least_existence: float
    parts: int
    road: str
    shape: bool
    def __init__(self, road: _Optional[str] = ..., least_existence: _Optional[float] = ..., parts: _Optional[int] = ..., flow_s: _Optional[float] = ..., shape: bool = ...) -> None: ...

class TrafficResponse(_message.Message):
    __slots__ = ["drive", "picture", "road", "shape", "version"]
    DRIVE_FIELD_NUMBER: _ClassVar[int]
    PICTURE_FIELD_NUMBER: _ClassVar[int]
    ROAD_FIELD_NUMBER: _ClassVar[int]
    SHAPE_FIELD_NUMBER: _ClassVar[int]
    VERSION_FIELD_NUMBER: _ClassVar[int]
    drive: str
    picture: TrafficPicture
    road: str
    shape: RoadShape
    version: str
    def __init__(self, road: _Optional[str] = ..., drive: _Optional[str] = ..., picture: _Optional[_Union[TrafficPicture, _Mapping]] = ..., shape: _Optional[_Union[RoadShape, _Mapping]] = ..., version: _Optional[str] = ...) -> None: ...

class TrafficDoubtKind(int, metaclass=_enum_type_wrapper.EnumTypeWrapper):
    __slots__ = []
