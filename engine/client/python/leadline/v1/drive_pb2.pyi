from google.protobuf import empty_pb2 as _empty_pb2
from google.protobuf import timestamp_pb2 as _timestamp_pb2
from leadline.v1 import measurement_pb2 as _measurement_pb2
from leadline.v1 import place_pb2 as _place_pb2
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Mapping as _Mapping, Optional as _Optional, Union as _Union

DESCRIPTOR: _descriptor.FileDescriptor

class DriveHeader(_message.Message):
    __slots__ = ["map", "posterior_interval_s", "start", "suite", "traffic", "vehicle"]
    MAP_FIELD_NUMBER: _ClassVar[int]
    POSTERIOR_INTERVAL_S_FIELD_NUMBER: _ClassVar[int]
    START_FIELD_NUMBER: _ClassVar[int]
    SUITE_FIELD_NUMBER: _ClassVar[int]
    TRAFFIC_FIELD_NUMBER: _ClassVar[int]
    VEHICLE_FIELD_NUMBER: _ClassVar[int]
    map: str
    posterior_interval_s: float
    start: Start
    suite: str
    traffic: bool
    vehicle: str
    def __init__(self, vehicle: _Optional[str] = ..., map: _Optional[str] = ..., suite: _Optional[str] = ..., start: _Optional[_Union[Start, _Mapping]] = ..., traffic: bool = ..., posterior_interval_s: _Optional[float] = ...) -> None: ...

class DriveRecord(_message.Message):
    __slots__ = ["header", "measurement", "number", "sensor", "time", "truth"]
    HEADER_FIELD_NUMBER: _ClassVar[int]
    MEASUREMENT_FIELD_NUMBER: _ClassVar[int]
    NUMBER_FIELD_NUMBER: _ClassVar[int]
    SENSOR_FIELD_NUMBER: _ClassVar[int]
    TIME_FIELD_NUMBER: _ClassVar[int]
    TRUTH_FIELD_NUMBER: _ClassVar[int]
    header: DriveHeader
    measurement: _measurement_pb2.Measurement
    number: int
    sensor: str
    time: _timestamp_pb2.Timestamp
    truth: Truth
    def __init__(self, time: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., sensor: _Optional[str] = ..., number: _Optional[int] = ..., header: _Optional[_Union[DriveHeader, _Mapping]] = ..., measurement: _Optional[_Union[_measurement_pb2.Measurement, _Mapping]] = ..., truth: _Optional[_Union[Truth, _Mapping]] = ...) -> None: ...

class Start(_message.Message):
    __slots__ = ["anywhere", "area", "point"]
    ANYWHERE_FIELD_NUMBER: _ClassVar[int]
    AREA_FIELD_NUMBER: _ClassVar[int]
    POINT_FIELD_NUMBER: _ClassVar[int]
    anywhere: _empty_pb2.Empty
    area: _place_pb2.Polygon
    point: StartPoint
    def __init__(self, point: _Optional[_Union[StartPoint, _Mapping]] = ..., area: _Optional[_Union[_place_pb2.Polygon, _Mapping]] = ..., anywhere: _Optional[_Union[_empty_pb2.Empty, _Mapping]] = ...) -> None: ...

class StartPoint(_message.Message):
    __slots__ = ["lat", "lon", "sigma_m"]
    LAT_FIELD_NUMBER: _ClassVar[int]
    LON_FIELD_NUMBER: _ClassVar[int]
    SIGMA_M_FIELD_NUMBER: _ClassVar[int]
    lat: float
    lon: float
    sigma_m: float
    def __init__(self, lon: _Optional[float] = ..., lat: _Optional[float] = ..., sigma_m: _Optional[float] = ...) -> None: ...

class Truth(_message.Message):
    __slots__ = ["height_m", "lat", "lon", "sigma_m", "vehicle"]
    HEIGHT_M_FIELD_NUMBER: _ClassVar[int]
    LAT_FIELD_NUMBER: _ClassVar[int]
    LON_FIELD_NUMBER: _ClassVar[int]
    SIGMA_M_FIELD_NUMBER: _ClassVar[int]
    VEHICLE_FIELD_NUMBER: _ClassVar[int]
    height_m: float
    lat: float
    lon: float
    sigma_m: float
    vehicle: str
    def __init__(self, lon: _Optional[float] = ..., lat: _Optional[float] = ..., height_m: _Optional[float] = ..., sigma_m: _Optional[float] = ..., vehicle: _Optional[str] = ...) -> None: ...
