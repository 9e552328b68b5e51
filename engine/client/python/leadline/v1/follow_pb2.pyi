from leadline.v1 import alarm_pb2 as _alarm_pb2
from leadline.v1 import belief_pb2 as _belief_pb2
from leadline.v1 import place_pb2 as _place_pb2
from leadline.v1 import posterior_pb2 as _posterior_pb2
from leadline.v1 import trail_pb2 as _trail_pb2
from google.protobuf.internal import containers as _containers
from google.protobuf.internal import enum_type_wrapper as _enum_type_wrapper
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Iterable as _Iterable, Mapping as _Mapping, Optional as _Optional, Union as _Union

DESCRIPTOR: _descriptor.FileDescriptor
DETAIL_BELIEF: Detail
DETAIL_MODES: Detail
DETAIL_REGION: Detail
DETAIL_SUMMARY: Detail
DETAIL_UNSPECIFIED: Detail

class Farewell(_message.Message):
    __slots__ = ["ended", "posterior_sha256", "reason"]
    ENDED_FIELD_NUMBER: _ClassVar[int]
    POSTERIOR_SHA256_FIELD_NUMBER: _ClassVar[int]
    REASON_FIELD_NUMBER: _ClassVar[int]
    ended: bool
    posterior_sha256: str
    reason: str
    def __init__(self, ended: bool = ..., posterior_sha256: _Optional[str] = ..., reason: _Optional[str] = ...) -> None: ...

class FollowRequest(_message.Message):
    __slots__ = ["alarms", "area", "area_probability", "belief_cells", "detail", "min_interval_s", "region_fractions", "resume_token", "roads", "status_changes_only", "vehicles"]
    ALARMS_FIELD_NUMBER: _ClassVar[int]
    AREA_FIELD_NUMBER: _ClassVar[int]
    AREA_PROBABILITY_FIELD_NUMBER: _ClassVar[int]
    BELIEF_CELLS_FIELD_NUMBER: _ClassVar[int]
    DETAIL_FIELD_NUMBER: _ClassVar[int]
    MIN_INTERVAL_S_FIELD_NUMBER: _ClassVar[int]
    REGION_FRACTIONS_FIELD_NUMBER: _ClassVar[int]
    RESUME_TOKEN_FIELD_NUMBER: _ClassVar[int]
    ROADS_FIELD_NUMBER: _ClassVar[int]
    STATUS_CHANGES_ONLY_FIELD_NUMBER: _ClassVar[int]
    VEHICLES_FIELD_NUMBER: _ClassVar[int]
    alarms: bool
    area: _place_pb2.Polygon
    area_probability: float
    belief_cells: int
    detail: Detail
    min_interval_s: float
    region_fractions: _containers.RepeatedScalarFieldContainer[float]
    resume_token: str
    roads: bool
    status_changes_only: bool
    vehicles: _containers.RepeatedScalarFieldContainer[str]
    def __init__(self, vehicles: _Optional[_Iterable[str]] = ..., detail: _Optional[_Union[Detail, str]] = ..., min_interval_s: _Optional[float] = ..., status_changes_only: bool = ..., area: _Optional[_Union[_place_pb2.Polygon, _Mapping]] = ..., area_probability: _Optional[float] = ..., region_fractions: _Optional[_Iterable[float]] = ..., resume_token: _Optional[str] = ..., alarms: bool = ..., belief_cells: _Optional[int] = ..., roads: bool = ...) -> None: ...

class FollowResponse(_message.Message):
    __slots__ = ["alarm", "belief", "drive", "farewell", "posterior", "recent", "resume_token", "road", "skipped", "vehicle", "withdrawn"]
    ALARM_FIELD_NUMBER: _ClassVar[int]
    BELIEF_FIELD_NUMBER: _ClassVar[int]
    DRIVE_FIELD_NUMBER: _ClassVar[int]
    FAREWELL_FIELD_NUMBER: _ClassVar[int]
    POSTERIOR_FIELD_NUMBER: _ClassVar[int]
    RECENT_FIELD_NUMBER: _ClassVar[int]
    RESUME_TOKEN_FIELD_NUMBER: _ClassVar[int]
    ROAD_FIELD_NUMBER: _ClassVar[int]
    SKIPPED_FIELD_NUMBER: _ClassVar[int]
    VEHICLE_FIELD_NUMBER: _ClassVar[int]
    WITHDRAWN_FIELD_NUMBER: _ClassVar[int]
    alarm: _alarm_pb2.AlarmRecord
    belief: _belief_pb2.Belief
    drive: str
    farewell: Farewell
    posterior: _posterior_pb2.Posterior
    recent: _containers.RepeatedCompositeFieldContainer[_trail_pb2.RecentMeasurement]
    resume_token: str
    road: FollowedRoad
    skipped: int
    vehicle: str
    withdrawn: _posterior_pb2.Withdrawn
    def __init__(self, vehicle: _Optional[str] = ..., drive: _Optional[str] = ..., posterior: _Optional[_Union[_posterior_pb2.Posterior, _Mapping]] = ..., withdrawn: _Optional[_Union[_posterior_pb2.Withdrawn, _Mapping]] = ..., farewell: _Optional[_Union[Farewell, _Mapping]] = ..., alarm: _Optional[_Union[_alarm_pb2.AlarmRecord, _Mapping]] = ..., road: _Optional[_Union[FollowedRoad, _Mapping]] = ..., belief: _Optional[_Union[_belief_pb2.Belief, _Mapping]] = ..., skipped: _Optional[int] = ..., resume_token: _Optional[str] = ..., recent: _Optional[_Iterable[_Union[_trail_pb2.RecentMeasurement, _Mapping]]] = ...) -> None: ...

class FollowedRoad(_message.Message):
    __slots__ = ["ended", "gone"]
    ENDED_FIELD_NUMBER: _ClassVar[int]
    GONE_FIELD_NUMBER: _ClassVar[int]
    ended: bool
    gone: bool
    def __init__(self, ended: bool = ..., gone: bool = ...) -> None: ...

class Detail(int, metaclass=_enum_type_wrapper.EnumTypeWrapper):
    __slots__ = []
