from google.protobuf import timestamp_pb2 as _timestamp_pb2
from leadline.v1 import alarm_pb2 as _alarm_pb2
from leadline.v1 import feed_pb2 as _feed_pb2
from leadline.v1 import measurement_pb2 as _measurement_pb2
from leadline.v1 import place_pb2 as _place_pb2
from leadline.v1 import posterior_pb2 as _posterior_pb2
from google.protobuf.internal import containers as _containers
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Iterable as _Iterable, Mapping as _Mapping, Optional as _Optional, Union as _Union

DESCRIPTOR: _descriptor.FileDescriptor

class AddSightingRequest(_message.Message):
    __slots__ = ["drive", "sighting", "time", "vehicle"]
    DRIVE_FIELD_NUMBER: _ClassVar[int]
    SIGHTING_FIELD_NUMBER: _ClassVar[int]
    TIME_FIELD_NUMBER: _ClassVar[int]
    VEHICLE_FIELD_NUMBER: _ClassVar[int]
    drive: str
    sighting: _measurement_pb2.Sighting
    time: _timestamp_pb2.Timestamp
    vehicle: str
    def __init__(self, vehicle: _Optional[str] = ..., drive: _Optional[str] = ..., time: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., sighting: _Optional[_Union[_measurement_pb2.Sighting, _Mapping]] = ...) -> None: ...

class AddSightingResponse(_message.Message):
    __slots__ = ["after", "before", "measurement", "refusal"]
    AFTER_FIELD_NUMBER: _ClassVar[int]
    BEFORE_FIELD_NUMBER: _ClassVar[int]
    MEASUREMENT_FIELD_NUMBER: _ClassVar[int]
    REFUSAL_FIELD_NUMBER: _ClassVar[int]
    after: _posterior_pb2.Posterior
    before: _posterior_pb2.Posterior
    measurement: _measurement_pb2.SensorMeasurement
    refusal: _feed_pb2.Refusal
    def __init__(self, measurement: _Optional[_Union[_measurement_pb2.SensorMeasurement, _Mapping]] = ..., refusal: _Optional[_Union[_feed_pb2.Refusal, _Mapping]] = ..., before: _Optional[_Union[_posterior_pb2.Posterior, _Mapping]] = ..., after: _Optional[_Union[_posterior_pb2.Posterior, _Mapping]] = ...) -> None: ...

class EndedDrive(_message.Message):
    __slots__ = ["drive", "map", "opened_at", "time", "vehicle"]
    DRIVE_FIELD_NUMBER: _ClassVar[int]
    MAP_FIELD_NUMBER: _ClassVar[int]
    OPENED_AT_FIELD_NUMBER: _ClassVar[int]
    TIME_FIELD_NUMBER: _ClassVar[int]
    VEHICLE_FIELD_NUMBER: _ClassVar[int]
    drive: str
    map: str
    opened_at: _timestamp_pb2.Timestamp
    time: _timestamp_pb2.Timestamp
    vehicle: str
    def __init__(self, vehicle: _Optional[str] = ..., drive: _Optional[str] = ..., map: _Optional[str] = ..., opened_at: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., time: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ...) -> None: ...

class ListEndedDrivesRequest(_message.Message):
    __slots__ = ["page_size", "page_token"]
    PAGE_SIZE_FIELD_NUMBER: _ClassVar[int]
    PAGE_TOKEN_FIELD_NUMBER: _ClassVar[int]
    page_size: int
    page_token: str
    def __init__(self, page_size: _Optional[int] = ..., page_token: _Optional[str] = ...) -> None: ...

class ListEndedDrivesResponse(_message.Message):
    __slots__ = ["drives", "next_page_token"]
    DRIVES_FIELD_NUMBER: _ClassVar[int]
    NEXT_PAGE_TOKEN_FIELD_NUMBER: _ClassVar[int]
    drives: _containers.RepeatedCompositeFieldContainer[EndedDrive]
    next_page_token: str
    def __init__(self, drives: _Optional[_Iterable[_Union[EndedDrive, _Mapping]]] = ..., next_page_token: _Optional[str] = ...) -> None: ...

class RecentMeasurement(_message.Message):
    __slots__ = ["measurement", "refusal"]
    MEASUREMENT_FIELD_NUMBER: _ClassVar[int]
    REFUSAL_FIELD_NUMBER: _ClassVar[int]
    measurement: _measurement_pb2.SensorMeasurement
    refusal: _feed_pb2.Refusal
    def __init__(self, measurement: _Optional[_Union[_measurement_pb2.SensorMeasurement, _Mapping]] = ..., refusal: _Optional[_Union[_feed_pb2.Refusal, _Mapping]] = ...) -> None: ...

class TrailPoint(_message.Message):
    __slots__ = ["log_evidence", "mean", "nuisances", "radius95_m", "status", "time"]
    LOG_EVIDENCE_FIELD_NUMBER: _ClassVar[int]
    MEAN_FIELD_NUMBER: _ClassVar[int]
    NUISANCES_FIELD_NUMBER: _ClassVar[int]
    RADIUS95_M_FIELD_NUMBER: _ClassVar[int]
    STATUS_FIELD_NUMBER: _ClassVar[int]
    TIME_FIELD_NUMBER: _ClassVar[int]
    log_evidence: float
    mean: _place_pb2.Position
    nuisances: _containers.RepeatedCompositeFieldContainer[_posterior_pb2.Nuisance]
    radius95_m: float
    status: _posterior_pb2.Status
    time: _timestamp_pb2.Timestamp
    def __init__(self, time: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., status: _Optional[_Union[_posterior_pb2.Status, str]] = ..., mean: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., radius95_m: _Optional[float] = ..., log_evidence: _Optional[float] = ..., nuisances: _Optional[_Iterable[_Union[_posterior_pb2.Nuisance, _Mapping]]] = ...) -> None: ...

class TrailRequest(_message.Message):
    __slots__ = ["drive", "vehicle"]
    DRIVE_FIELD_NUMBER: _ClassVar[int]
    VEHICLE_FIELD_NUMBER: _ClassVar[int]
    drive: str
    vehicle: str
    def __init__(self, vehicle: _Optional[str] = ..., drive: _Optional[str] = ...) -> None: ...

class TrailResponse(_message.Message):
    __slots__ = ["alarms", "alert_limit_m", "drive", "map", "map_fingerprint", "points"]
    ALARMS_FIELD_NUMBER: _ClassVar[int]
    ALERT_LIMIT_M_FIELD_NUMBER: _ClassVar[int]
    DRIVE_FIELD_NUMBER: _ClassVar[int]
    MAP_FIELD_NUMBER: _ClassVar[int]
    MAP_FINGERPRINT_FIELD_NUMBER: _ClassVar[int]
    POINTS_FIELD_NUMBER: _ClassVar[int]
    alarms: _containers.RepeatedCompositeFieldContainer[_alarm_pb2.AlarmRecord]
    alert_limit_m: float
    drive: str
    map: str
    map_fingerprint: str
    points: _containers.RepeatedCompositeFieldContainer[TrailPoint]
    def __init__(self, drive: _Optional[str] = ..., points: _Optional[_Iterable[_Union[TrailPoint, _Mapping]]] = ..., map: _Optional[str] = ..., map_fingerprint: _Optional[str] = ..., alert_limit_m: _Optional[float] = ..., alarms: _Optional[_Iterable[_Union[_alarm_pb2.AlarmRecord, _Mapping]]] = ...) -> None: ...
