from google.protobuf import timestamp_pb2 as _timestamp_pb2
from leadline.v1 import feed_pb2 as _feed_pb2
from leadline.v1 import posterior_pb2 as _posterior_pb2
from google.protobuf.internal import containers as _containers
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Iterable as _Iterable, Mapping as _Mapping, Optional as _Optional, Union as _Union

DESCRIPTOR: _descriptor.FileDescriptor

class DescribeJournalRequest(_message.Message):
    __slots__ = []
    def __init__(self) -> None: ...

class DescribeJournalResponse(_message.Message):
    __slots__ = ["bytes", "epoch", "failure", "free_bytes", "keep_for_s", "leave_bytes", "most_bytes", "oldest", "other_servers", "own_partitions", "partitions", "records", "refused", "waiting", "where"]
    BYTES_FIELD_NUMBER: _ClassVar[int]
    EPOCH_FIELD_NUMBER: _ClassVar[int]
    FAILURE_FIELD_NUMBER: _ClassVar[int]
    FREE_BYTES_FIELD_NUMBER: _ClassVar[int]
    KEEP_FOR_S_FIELD_NUMBER: _ClassVar[int]
    LEAVE_BYTES_FIELD_NUMBER: _ClassVar[int]
    MOST_BYTES_FIELD_NUMBER: _ClassVar[int]
    OLDEST_FIELD_NUMBER: _ClassVar[int]
    OTHER_SERVERS_FIELD_NUMBER: _ClassVar[int]
    OWN_PARTITIONS_FIELD_NUMBER: _ClassVar[int]
    PARTITIONS_FIELD_NUMBER: _ClassVar[int]
    RECORDS_FIELD_NUMBER: _ClassVar[int]
    REFUSED_FIELD_NUMBER: _ClassVar[int]
    WAITING_FIELD_NUMBER: _ClassVar[int]
    WHERE_FIELD_NUMBER: _ClassVar[int]
    bytes: int
    epoch: int
    failure: str
    free_bytes: int
    keep_for_s: float
    leave_bytes: int
    most_bytes: int
    oldest: _timestamp_pb2.Timestamp
    other_servers: _containers.RepeatedScalarFieldContainer[str]
    own_partitions: int
    partitions: int
    records: int
    refused: int
    waiting: int
    where: str
    def __init__(self, where: _Optional[str] = ..., epoch: _Optional[int] = ..., partitions: _Optional[int] = ..., bytes: _Optional[int] = ..., most_bytes: _Optional[int] = ..., free_bytes: _Optional[int] = ..., leave_bytes: _Optional[int] = ..., records: _Optional[int] = ..., refused: _Optional[int] = ..., waiting: _Optional[int] = ..., oldest: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., keep_for_s: _Optional[float] = ..., failure: _Optional[str] = ..., own_partitions: _Optional[int] = ..., other_servers: _Optional[_Iterable[str]] = ...) -> None: ...

class EndDriveRequest(_message.Message):
    __slots__ = ["drive", "vehicle"]
    DRIVE_FIELD_NUMBER: _ClassVar[int]
    VEHICLE_FIELD_NUMBER: _ClassVar[int]
    drive: str
    vehicle: str
    def __init__(self, vehicle: _Optional[str] = ..., drive: _Optional[str] = ...) -> None: ...

class EndDriveResponse(_message.Message):
    __slots__ = ["closed"]
    CLOSED_FIELD_NUMBER: _ClassVar[int]
    closed: _feed_pb2.Closed
    def __init__(self, closed: _Optional[_Union[_feed_pb2.Closed, _Mapping]] = ...) -> None: ...

class EraseVehicleRequest(_message.Message):
    __slots__ = ["vehicle"]
    VEHICLE_FIELD_NUMBER: _ClassVar[int]
    vehicle: str
    def __init__(self, vehicle: _Optional[str] = ...) -> None: ...

class EraseVehicleResponse(_message.Message):
    __slots__ = ["drives", "records"]
    DRIVES_FIELD_NUMBER: _ClassVar[int]
    RECORDS_FIELD_NUMBER: _ClassVar[int]
    drives: int
    records: int
    def __init__(self, drives: _Optional[int] = ..., records: _Optional[int] = ...) -> None: ...

class ListVehiclesRequest(_message.Message):
    __slots__ = ["map", "page_size", "page_token", "traffic"]
    MAP_FIELD_NUMBER: _ClassVar[int]
    PAGE_SIZE_FIELD_NUMBER: _ClassVar[int]
    PAGE_TOKEN_FIELD_NUMBER: _ClassVar[int]
    TRAFFIC_FIELD_NUMBER: _ClassVar[int]
    map: str
    page_size: int
    page_token: str
    traffic: bool
    def __init__(self, map: _Optional[str] = ..., page_size: _Optional[int] = ..., page_token: _Optional[str] = ..., traffic: bool = ...) -> None: ...

class ListVehiclesResponse(_message.Message):
    __slots__ = ["next_page_token", "vehicles"]
    NEXT_PAGE_TOKEN_FIELD_NUMBER: _ClassVar[int]
    VEHICLES_FIELD_NUMBER: _ClassVar[int]
    next_page_token: str
    vehicles: _containers.RepeatedCompositeFieldContainer[Vehicle]
    def __init__(self, vehicles: _Optional[_Iterable[_Union[Vehicle, _Mapping]]] = ..., next_page_token: _Optional[str] = ...) -> None: ...

class Vehicle(_message.Message):
    __slots__ = ["age_s", "connected", "drive", "ended", "map", "map_fingerprint", "newer_map_fingerprint", "opened_at", "status", "suite", "time", "vehicle"]
    AGE_S_FIELD_NUMBER: _ClassVar[int]
    CONNECTED_FIELD_NUMBER: _ClassVar[int]
    DRIVE_FIELD_NUMBER: _ClassVar[int]
    ENDED_FIELD_NUMBER: _ClassVar[int]
    MAP_FIELD_NUMBER: _ClassVar[int]
    MAP_FINGERPRINT_FIELD_NUMBER: _ClassVar[int]
    NEWER_MAP_FINGERPRINT_FIELD_NUMBER: _ClassVar[int]
    OPENED_AT_FIELD_NUMBER: _ClassVar[int]
    STATUS_FIELD_NUMBER: _ClassVar[int]
    SUITE_FIELD_NUMBER: _ClassVar[int]
    TIME_FIELD_NUMBER: _ClassVar[int]
    VEHICLE_FIELD_NUMBER: _ClassVar[int]
    age_s: float
    connected: bool
    drive: str
    ended: bool
    map: str
    map_fingerprint: str
    newer_map_fingerprint: str
    opened_at: _timestamp_pb2.Timestamp
    status: _posterior_pb2.Status
    suite: str
    time: _timestamp_pb2.Timestamp
    vehicle: str
    def __init__(self, vehicle: _Optional[str] = ..., drive: _Optional[str] = ..., map: _Optional[str] = ..., map_fingerprint: _Optional[str] = ..., suite: _Optional[str] = ..., status: _Optional[_Union[_posterior_pb2.Status, str]] = ..., time: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., age_s: _Optional[float] = ..., opened_at: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., connected: bool = ..., ended: bool = ..., newer_map_fingerprint: _Optional[str] = ...) -> None: ...
