from leadline.v1 import place_pb2 as _place_pb2
from leadline.v1 import posterior_pb2 as _posterior_pb2
from leadline.v1 import reason_pb2 as _reason_pb2
from google.protobuf.internal import containers as _containers
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Iterable as _Iterable, Mapping as _Mapping, Optional as _Optional, Union as _Union

DESCRIPTOR: _descriptor.FileDescriptor

class WhereAnswer(_message.Message):
    __slots__ = ["drive", "ended", "failure", "posterior", "posterior_sha256", "vehicle"]
    DRIVE_FIELD_NUMBER: _ClassVar[int]
    ENDED_FIELD_NUMBER: _ClassVar[int]
    FAILURE_FIELD_NUMBER: _ClassVar[int]
    POSTERIOR_FIELD_NUMBER: _ClassVar[int]
    POSTERIOR_SHA256_FIELD_NUMBER: _ClassVar[int]
    VEHICLE_FIELD_NUMBER: _ClassVar[int]
    drive: str
    ended: bool
    failure: _reason_pb2.Failure
    posterior: _posterior_pb2.Posterior
    posterior_sha256: str
    vehicle: str
    def __init__(self, vehicle: _Optional[str] = ..., drive: _Optional[str] = ..., posterior: _Optional[_Union[_posterior_pb2.Posterior, _Mapping]] = ..., posterior_sha256: _Optional[str] = ..., ended: bool = ..., failure: _Optional[_Union[_reason_pb2.Failure, _Mapping]] = ...) -> None: ...

class WhereRequest(_message.Message):
    __slots__ = ["ago_s", "area", "integrity_risk", "predict_to_now", "region_fractions", "vehicles"]
    AGO_S_FIELD_NUMBER: _ClassVar[int]
    AREA_FIELD_NUMBER: _ClassVar[int]
    INTEGRITY_RISK_FIELD_NUMBER: _ClassVar[int]
    PREDICT_TO_NOW_FIELD_NUMBER: _ClassVar[int]
    REGION_FRACTIONS_FIELD_NUMBER: _ClassVar[int]
    VEHICLES_FIELD_NUMBER: _ClassVar[int]
    ago_s: float
    area: _place_pb2.Polygon
    integrity_risk: float
    predict_to_now: bool
    region_fractions: _containers.RepeatedScalarFieldContainer[float]
    vehicles: _containers.RepeatedScalarFieldContainer[str]
    def __init__(self, vehicles: _Optional[_Iterable[str]] = ..., region_fractions: _Optional[_Iterable[float]] = ..., area: _Optional[_Union[_place_pb2.Polygon, _Mapping]] = ..., integrity_risk: _Optional[float] = ..., predict_to_now: bool = ..., ago_s: _Optional[float] = ...) -> None: ...

class WhereResponse(_message.Message):
    __slots__ = ["answers", "version"]
    ANSWERS_FIELD_NUMBER: _ClassVar[int]
    VERSION_FIELD_NUMBER: _ClassVar[int]
    answers: _containers.RepeatedCompositeFieldContainer[WhereAnswer]
    version: str
    def __init__(self, answers: _Optional[_Iterable[_Union[WhereAnswer, _Mapping]]] = ..., version: _Optional[str] = ...) -> None: ...
