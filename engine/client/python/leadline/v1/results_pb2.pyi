from google.protobuf import timestamp_pb2 as _timestamp_pb2
from leadline.v1 import place_pb2 as _place_pb2
from google.protobuf.internal import containers as _containers
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Iterable as _Iterable, Mapping as _Mapping, Optional as _Optional, Union as _Union

DESCRIPTOR: _descriptor.FileDescriptor

class ListResultsRequest(_message.Message):
    __slots__ = ["page_size", "page_token"]
    PAGE_SIZE_FIELD_NUMBER: _ClassVar[int]
    PAGE_TOKEN_FIELD_NUMBER: _ClassVar[int]
    page_size: int
    page_token: str
    def __init__(self, page_size: _Optional[int] = ..., page_token: _Optional[str] = ...) -> None: ...

class ListResultsResponse(_message.Message):
    __slots__ = ["next_page_token", "results"]
    NEXT_PAGE_TOKEN_FIELD_NUMBER: _ClassVar[int]
    RESULTS_FIELD_NUMBER: _ClassVar[int]
    next_page_token: str
    results: _containers.RepeatedCompositeFieldContainer[ResultDescription]
    def __init__(self, results: _Optional[_Iterable[_Union[ResultDescription, _Mapping]]] = ..., next_page_token: _Optional[str] = ...) -> None: ...

class ReadResultRequest(_message.Message):
    __slots__ = ["name"]
    NAME_FIELD_NUMBER: _ClassVar[int]
    name: str
    def __init__(self, name: _Optional[str] = ...) -> None: ...

class ReadResultResponse(_message.Message):
    __slots__ = ["alarms", "moments", "result"]
    ALARMS_FIELD_NUMBER: _ClassVar[int]
    MOMENTS_FIELD_NUMBER: _ClassVar[int]
    RESULT_FIELD_NUMBER: _ClassVar[int]
    alarms: _containers.RepeatedCompositeFieldContainer[ResultAlarm]
    moments: _containers.RepeatedCompositeFieldContainer[ResultMoment]
    result: ResultDescription
    def __init__(self, result: _Optional[_Union[ResultDescription, _Mapping]] = ..., moments: _Optional[_Iterable[_Union[ResultMoment, _Mapping]]] = ..., alarms: _Optional[_Iterable[_Union[ResultAlarm, _Mapping]]] = ...) -> None: ...

class ResultAlarm(_message.Message):
    __slots__ = ["cleared", "raised", "what"]
    CLEARED_FIELD_NUMBER: _ClassVar[int]
    RAISED_FIELD_NUMBER: _ClassVar[int]
    WHAT_FIELD_NUMBER: _ClassVar[int]
    cleared: _timestamp_pb2.Timestamp
    raised: _timestamp_pb2.Timestamp
    what: str
    def __init__(self, raised: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., cleared: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., what: _Optional[str] = ...) -> None: ...

class ResultDescription(_message.Message):
    __slots__ = ["alert_limit_m", "coverage95", "drive", "map", "map_fingerprint", "max_m", "name", "p50_m", "p95_m", "partial", "posteriors", "setting", "stopped", "suite", "trouble", "vehicle"]
    ALERT_LIMIT_M_FIELD_NUMBER: _ClassVar[int]
    COVERAGE95_FIELD_NUMBER: _ClassVar[int]
    DRIVE_FIELD_NUMBER: _ClassVar[int]
    MAP_FIELD_NUMBER: _ClassVar[int]
    MAP_FINGERPRINT_FIELD_NUMBER: _ClassVar[int]
    MAX_M_FIELD_NUMBER: _ClassVar[int]
    NAME_FIELD_NUMBER: _ClassVar[int]
    P50_M_FIELD_NUMBER: _ClassVar[int]
    P95_M_FIELD_NUMBER: _ClassVar[int]
    PARTIAL_FIELD_NUMBER: _ClassVar[int]
    POSTERIORS_FIELD_NUMBER: _ClassVar[int]
    SETTING_FIELD_NUMBER: _ClassVar[int]
    STOPPED_FIELD_NUMBER: _ClassVar[int]
    SUITE_FIELD_NUMBER: _ClassVar[int]
    TROUBLE_FIELD_NUMBER: _ClassVar[int]
    VEHICLE_FIELD_NUMBER: _ClassVar[int]
    alert_limit_m: float
    coverage95: float
    drive: str
    map: str
    map_fingerprint: str
    max_m: float
    name: str
    p50_m: float
    p95_m: float
    partial: bool
    posteriors: int
    setting: str
    stopped: str
    suite: str
    trouble: str
    vehicle: str
    def __init__(self, name: _Optional[str] = ..., trouble: _Optional[str] = ..., drive: _Optional[str] = ..., setting: _Optional[str] = ..., vehicle: _Optional[str] = ..., map: _Optional[str] = ..., map_fingerprint: _Optional[str] = ..., suite: _Optional[str] = ..., alert_limit_m: _Optional[float] = ..., posteriors: _Optional[int] = ..., p50_m: _Optional[float] = ..., p95_m: _Optional[float] = ..., max_m: _Optional[float] = ..., coverage95: _Optional[float] = ..., partial: bool = ..., stopped: _Optional[str] = ...) -> None: ...

class ResultMoment(_message.Message):
    __slots__ = ["error_m", "position", "protection_m", "radius95_m", "status", "time", "truth"]
    ERROR_M_FIELD_NUMBER: _ClassVar[int]
    POSITION_FIELD_NUMBER: _ClassVar[int]
    PROTECTION_M_FIELD_NUMBER: _ClassVar[int]
    RADIUS95_M_FIELD_NUMBER: _ClassVar[int]
    STATUS_FIELD_NUMBER: _ClassVar[int]
    TIME_FIELD_NUMBER: _ClassVar[int]
    TRUTH_FIELD_NUMBER: _ClassVar[int]
    error_m: float
    position: _place_pb2.Position
    protection_m: float
    radius95_m: float
    status: str
    time: _timestamp_pb2.Timestamp
    truth: _place_pb2.Position
    def __init__(self, time: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., status: _Optional[str] = ..., position: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., radius95_m: _Optional[float] = ..., protection_m: _Optional[float] = ..., truth: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., error_m: _Optional[float] = ...) -> None: ...
