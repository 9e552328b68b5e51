from google.protobuf import timestamp_pb2 as _timestamp_pb2
from leadline.v1 import drive_pb2 as _drive_pb2
from leadline.v1 import measurement_pb2 as _measurement_pb2
from leadline.v1 import posterior_pb2 as _posterior_pb2
from leadline.v1 import reason_pb2 as _reason_pb2
from leadline.v1 import traffic_pb2 as _traffic_pb2
from google.protobuf.internal import containers as _containers
from google.protobuf.internal import enum_type_wrapper as _enum_type_wrapper
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Iterable as _Iterable, Mapping as _Mapping, Optional as _Optional, Union as _Union

DESCRIPTOR: _descriptor.FileDescriptor
REPLY_EVERY: Reply
REPLY_LATEST: Reply
REPLY_NONE: Reply
REPLY_UNSPECIFIED: Reply

class Batch(_message.Message):
    __slots__ = ["measurements", "sequence"]
    MEASUREMENTS_FIELD_NUMBER: _ClassVar[int]
    SEQUENCE_FIELD_NUMBER: _ClassVar[int]
    measurements: _containers.RepeatedCompositeFieldContainer[_measurement_pb2.SensorMeasurement]
    sequence: int
    def __init__(self, sequence: _Optional[int] = ..., measurements: _Optional[_Iterable[_Union[_measurement_pb2.SensorMeasurement, _Mapping]]] = ...) -> None: ...

class Closed(_message.Message):
    __slots__ = ["accepted", "posterior", "posterior_sha256", "posteriors", "refused", "traffic", "version"]
    ACCEPTED_FIELD_NUMBER: _ClassVar[int]
    POSTERIORS_FIELD_NUMBER: _ClassVar[int]
    POSTERIOR_FIELD_NUMBER: _ClassVar[int]
    POSTERIOR_SHA256_FIELD_NUMBER: _ClassVar[int]
    REFUSED_FIELD_NUMBER: _ClassVar[int]
    TRAFFIC_FIELD_NUMBER: _ClassVar[int]
    VERSION_FIELD_NUMBER: _ClassVar[int]
    accepted: int
    posterior: _posterior_pb2.Posterior
    posterior_sha256: str
    posteriors: int
    refused: int
    traffic: _traffic_pb2.TrafficPicture
    version: str
    def __init__(self, posterior: _Optional[_Union[_posterior_pb2.Posterior, _Mapping]] = ..., posteriors: _Optional[int] = ..., posterior_sha256: _Optional[str] = ..., accepted: _Optional[int] = ..., refused: _Optional[int] = ..., version: _Optional[str] = ..., traffic: _Optional[_Union[_traffic_pb2.TrafficPicture, _Mapping]] = ...) -> None: ...

class End(_message.Message):
    __slots__ = []
    def __init__(self) -> None: ...

class FeedRequest(_message.Message):
    __slots__ = ["batch", "end", "open"]
    BATCH_FIELD_NUMBER: _ClassVar[int]
    END_FIELD_NUMBER: _ClassVar[int]
    OPEN_FIELD_NUMBER: _ClassVar[int]
    batch: Batch
    end: End
    open: Open
    def __init__(self, open: _Optional[_Union[Open, _Mapping]] = ..., batch: _Optional[_Union[Batch, _Mapping]] = ..., end: _Optional[_Union[End, _Mapping]] = ...) -> None: ...

class FeedResponse(_message.Message):
    __slots__ = ["closed", "opened", "posterior", "receipt", "withdrawn"]
    CLOSED_FIELD_NUMBER: _ClassVar[int]
    OPENED_FIELD_NUMBER: _ClassVar[int]
    POSTERIOR_FIELD_NUMBER: _ClassVar[int]
    RECEIPT_FIELD_NUMBER: _ClassVar[int]
    WITHDRAWN_FIELD_NUMBER: _ClassVar[int]
    closed: Closed
    opened: Opened
    posterior: _posterior_pb2.Posterior
    receipt: Receipt
    withdrawn: _posterior_pb2.Withdrawn
    def __init__(self, opened: _Optional[_Union[Opened, _Mapping]] = ..., receipt: _Optional[_Union[Receipt, _Mapping]] = ..., posterior: _Optional[_Union[_posterior_pb2.Posterior, _Mapping]] = ..., closed: _Optional[_Union[Closed, _Mapping]] = ..., withdrawn: _Optional[_Union[_posterior_pb2.Withdrawn, _Mapping]] = ...) -> None: ...

class Open(_message.Message):
    __slots__ = ["acknowledged", "drive", "header", "replace", "reply"]
    ACKNOWLEDGED_FIELD_NUMBER: _ClassVar[int]
    DRIVE_FIELD_NUMBER: _ClassVar[int]
    HEADER_FIELD_NUMBER: _ClassVar[int]
    REPLACE_FIELD_NUMBER: _ClassVar[int]
    REPLY_FIELD_NUMBER: _ClassVar[int]
    acknowledged: int
    drive: str
    header: _drive_pb2.DriveHeader
    replace: bool
    reply: Reply
    def __init__(self, header: _Optional[_Union[_drive_pb2.DriveHeader, _Mapping]] = ..., drive: _Optional[str] = ..., replace: bool = ..., reply: _Optional[_Union[Reply, str]] = ..., acknowledged: _Optional[int] = ...) -> None: ...

class Opened(_message.Message):
    __slots__ = ["map_fingerprint", "max_batch", "max_message_bytes", "sequence", "version"]
    MAP_FINGERPRINT_FIELD_NUMBER: _ClassVar[int]
    MAX_BATCH_FIELD_NUMBER: _ClassVar[int]
    MAX_MESSAGE_BYTES_FIELD_NUMBER: _ClassVar[int]
    SEQUENCE_FIELD_NUMBER: _ClassVar[int]
    VERSION_FIELD_NUMBER: _ClassVar[int]
    map_fingerprint: str
    max_batch: int
    max_message_bytes: int
    sequence: int
    version: str
    def __init__(self, sequence: _Optional[int] = ..., map_fingerprint: _Optional[str] = ..., max_batch: _Optional[int] = ..., max_message_bytes: _Optional[int] = ..., version: _Optional[str] = ...) -> None: ...

class Receipt(_message.Message):
    __slots__ = ["accepted", "durable", "refusals", "sequence"]
    ACCEPTED_FIELD_NUMBER: _ClassVar[int]
    DURABLE_FIELD_NUMBER: _ClassVar[int]
    REFUSALS_FIELD_NUMBER: _ClassVar[int]
    SEQUENCE_FIELD_NUMBER: _ClassVar[int]
    accepted: int
    durable: bool
    refusals: _containers.RepeatedCompositeFieldContainer[Refusal]
    sequence: int
    def __init__(self, sequence: _Optional[int] = ..., accepted: _Optional[int] = ..., refusals: _Optional[_Iterable[_Union[Refusal, _Mapping]]] = ..., durable: bool = ...) -> None: ...

class Refusal(_message.Message):
    __slots__ = ["detail", "index", "number", "reason", "sensor", "time"]
    DETAIL_FIELD_NUMBER: _ClassVar[int]
    INDEX_FIELD_NUMBER: _ClassVar[int]
    NUMBER_FIELD_NUMBER: _ClassVar[int]
    REASON_FIELD_NUMBER: _ClassVar[int]
    SENSOR_FIELD_NUMBER: _ClassVar[int]
    TIME_FIELD_NUMBER: _ClassVar[int]
    detail: str
    index: int
    number: int
    reason: _reason_pb2.Reason
    sensor: str
    time: _timestamp_pb2.Timestamp
    def __init__(self, index: _Optional[int] = ..., time: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., sensor: _Optional[str] = ..., number: _Optional[int] = ..., reason: _Optional[_Union[_reason_pb2.Reason, str]] = ..., detail: _Optional[str] = ...) -> None: ...

class Reply(int, metaclass=_enum_type_wrapper.EnumTypeWrapper):
    __slots__ = []
