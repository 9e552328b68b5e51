from google.protobuf.internal import enum_type_wrapper as _enum_type_wrapper
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Optional as _Optional, Union as _Union

DESCRIPTOR: _descriptor.FileDescriptor
REASON_BAD_FIELD: Reason
REASON_BAD_IDENTITY: Reason
REASON_BAD_MAP: Reason
REASON_BAD_RESULT: Reason
REASON_BAD_START: Reason
REASON_BAD_TOKEN: Reason
REASON_CONFLICTING: Reason
REASON_DRIVE_ENDED: Reason
REASON_ERASED: Reason
REASON_IDENTITY_EXPIRED: Reason
REASON_IDENTITY_UNCHECKED: Reason
REASON_JOURNAL_DAMAGED: Reason
REASON_JOURNAL_DOWN: Reason
REASON_JOURNAL_FULL: Reason
REASON_MAP_EXISTS: Reason
REASON_NOT_ALLOWED: Reason
REASON_NOT_OFFERED: Reason
REASON_NO_IDENTITY: Reason
REASON_NO_POSTERIOR: Reason
REASON_OTHER_DRIVE: Reason
REASON_OTHER_HEADER: Reason
REASON_OUT_OF_ORDER: Reason
REASON_RECOVERING: Reason
REASON_REPLACED: Reason
REASON_SERVER_FULL: Reason
REASON_SESSION_FAILED: Reason
REASON_SILENT: Reason
REASON_STOPPING: Reason
REASON_TAKEN_OVER: Reason
REASON_TOO_EARLY: Reason
REASON_TOO_FAST: Reason
REASON_TOO_LATE: Reason
REASON_TOO_MUCH: Reason
REASON_UNKNOWN_ALARM: Reason
REASON_UNKNOWN_DRIVE: Reason
REASON_UNKNOWN_MAP: Reason
REASON_UNKNOWN_RESULT: Reason
REASON_UNKNOWN_SUITE: Reason
REASON_UNKNOWN_VEHICLE: Reason
REASON_UNSPECIFIED: Reason
REASON_UNUSABLE: Reason
REASON_WRONG_MESSAGE: Reason
REASON_WRONG_SPACE: Reason

class Failure(_message.Message):
    __slots__ = ["message", "reason"]
    MESSAGE_FIELD_NUMBER: _ClassVar[int]
    REASON_FIELD_NUMBER: _ClassVar[int]
    message: str
    reason: Reason
    def __init__(self, reason: _Optional[_Union[Reason, str]] = ..., message: _Optional[str] = ...) -> None: ...

class Reason(int, metaclass=_enum_type_wrapper.EnumTypeWrapper):
    __slots__ = []
