from google.protobuf import timestamp_pb2 as _timestamp_pb2
from leadline.v1 import posterior_pb2 as _posterior_pb2
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Mapping as _Mapping, Optional as _Optional, Union as _Union

DESCRIPTOR: _descriptor.FileDescriptor

class AlarmRecord(_message.Message):
    __slots__ = ["alarm", "cleared_at", "cleared_reason", "drive", "lost", "note", "number", "raised_at", "seen_at", "seen_by", "vehicle"]
    ALARM_FIELD_NUMBER: _ClassVar[int]
    CLEARED_AT_FIELD_NUMBER: _ClassVar[int]
    CLEARED_REASON_FIELD_NUMBER: _ClassVar[int]
    DRIVE_FIELD_NUMBER: _ClassVar[int]
    LOST_FIELD_NUMBER: _ClassVar[int]
    NOTE_FIELD_NUMBER: _ClassVar[int]
    NUMBER_FIELD_NUMBER: _ClassVar[int]
    RAISED_AT_FIELD_NUMBER: _ClassVar[int]
    SEEN_AT_FIELD_NUMBER: _ClassVar[int]
    SEEN_BY_FIELD_NUMBER: _ClassVar[int]
    VEHICLE_FIELD_NUMBER: _ClassVar[int]
    alarm: _posterior_pb2.Alarm
    cleared_at: _timestamp_pb2.Timestamp
    cleared_reason: str
    drive: str
    lost: bool
    note: str
    number: int
    raised_at: _timestamp_pb2.Timestamp
    seen_at: _timestamp_pb2.Timestamp
    seen_by: str
    vehicle: str
    def __init__(self, number: _Optional[int] = ..., vehicle: _Optional[str] = ..., drive: _Optional[str] = ..., alarm: _Optional[_Union[_posterior_pb2.Alarm, _Mapping]] = ..., lost: bool = ..., raised_at: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., cleared_at: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., seen_at: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., cleared_reason: _Optional[str] = ..., seen_by: _Optional[str] = ..., note: _Optional[str] = ...) -> None: ...

class SeeAlarmRequest(_message.Message):
    __slots__ = ["note", "number", "who"]
    NOTE_FIELD_NUMBER: _ClassVar[int]
    NUMBER_FIELD_NUMBER: _ClassVar[int]
    WHO_FIELD_NUMBER: _ClassVar[int]
    note: str
    number: int
    who: str
    def __init__(self, number: _Optional[int] = ..., who: _Optional[str] = ..., note: _Optional[str] = ...) -> None: ...

class SeeAlarmResponse(_message.Message):
    __slots__ = ["alarm"]
    ALARM_FIELD_NUMBER: _ClassVar[int]
    alarm: AlarmRecord
    def __init__(self, alarm: _Optional[_Union[AlarmRecord, _Mapping]] = ...) -> None: ...
