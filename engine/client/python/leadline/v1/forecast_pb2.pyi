from leadline.v1 import place_pb2 as _place_pb2
from google.protobuf.internal import containers as _containers
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Iterable as _Iterable, Mapping as _Mapping, Optional as _Optional, Union as _Union

DESCRIPTOR: _descriptor.FileDescriptor

class AlikeStretch(_message.Message):
    __slots__ = ["ambiguity", "from_m", "located_m", "to_m"]
    AMBIGUITY_FIELD_NUMBER: _ClassVar[int]
    FROM_M_FIELD_NUMBER: _ClassVar[int]
    LOCATED_M_FIELD_NUMBER: _ClassVar[int]
    TO_M_FIELD_NUMBER: _ClassVar[int]
    ambiguity: float
    from_m: float
    located_m: float
    to_m: float
    def __init__(self, from_m: _Optional[float] = ..., to_m: _Optional[float] = ..., ambiguity: _Optional[float] = ..., located_m: _Optional[float] = ...) -> None: ...

class Forecast(_message.Message):
    __slots__ = ["alike", "beyond_limit", "duration_s", "integrity_risk", "left_out", "length_m", "limit_m", "median_radius95_m", "most_ambiguous", "protection_beyond_limit", "rates", "route", "samples", "weak", "worst_at_m", "worst_radius95_m"]
    ALIKE_FIELD_NUMBER: _ClassVar[int]
    BEYOND_LIMIT_FIELD_NUMBER: _ClassVar[int]
    DURATION_S_FIELD_NUMBER: _ClassVar[int]
    INTEGRITY_RISK_FIELD_NUMBER: _ClassVar[int]
    LEFT_OUT_FIELD_NUMBER: _ClassVar[int]
    LENGTH_M_FIELD_NUMBER: _ClassVar[int]
    LIMIT_M_FIELD_NUMBER: _ClassVar[int]
    MEDIAN_RADIUS95_M_FIELD_NUMBER: _ClassVar[int]
    MOST_AMBIGUOUS_FIELD_NUMBER: _ClassVar[int]
    PROTECTION_BEYOND_LIMIT_FIELD_NUMBER: _ClassVar[int]
    RATES_FIELD_NUMBER: _ClassVar[int]
    ROUTE_FIELD_NUMBER: _ClassVar[int]
    SAMPLES_FIELD_NUMBER: _ClassVar[int]
    WEAK_FIELD_NUMBER: _ClassVar[int]
    WORST_AT_M_FIELD_NUMBER: _ClassVar[int]
    WORST_RADIUS95_M_FIELD_NUMBER: _ClassVar[int]
    alike: _containers.RepeatedCompositeFieldContainer[AlikeStretch]
    beyond_limit: float
    duration_s: float
    integrity_risk: float
    left_out: _containers.RepeatedScalarFieldContainer[str]
    length_m: float
    limit_m: float
    median_radius95_m: float
    most_ambiguous: float
    protection_beyond_limit: float
    rates: _containers.RepeatedCompositeFieldContainer[SensorRate]
    route: str
    samples: _containers.RepeatedCompositeFieldContainer[ForecastSample]
    weak: _containers.RepeatedCompositeFieldContainer[WeakStretch]
    worst_at_m: float
    worst_radius95_m: float
    def __init__(self, route: _Optional[str] = ..., length_m: _Optional[float] = ..., duration_s: _Optional[float] = ..., limit_m: _Optional[float] = ..., integrity_risk: _Optional[float] = ..., rates: _Optional[_Iterable[_Union[SensorRate, _Mapping]]] = ..., left_out: _Optional[_Iterable[str]] = ..., worst_radius95_m: _Optional[float] = ..., worst_at_m: _Optional[float] = ..., median_radius95_m: _Optional[float] = ..., beyond_limit: _Optional[float] = ..., protection_beyond_limit: _Optional[float] = ..., most_ambiguous: _Optional[float] = ..., samples: _Optional[_Iterable[_Union[ForecastSample, _Mapping]]] = ..., alike: _Optional[_Iterable[_Union[AlikeStretch, _Mapping]]] = ..., weak: _Optional[_Iterable[_Union[WeakStretch, _Mapping]]] = ...) -> None: ...

class ForecastProgress(_message.Message):
    __slots__ = ["done", "total"]
    DONE_FIELD_NUMBER: _ClassVar[int]
    TOTAL_FIELD_NUMBER: _ClassVar[int]
    done: int
    total: int
    def __init__(self, done: _Optional[int] = ..., total: _Optional[int] = ...) -> None: ...

class ForecastRequest(_message.Message):
    __slots__ = ["limit_m", "map", "no_ambiguity", "route_file", "route_points", "speed_mps", "start_sigma_m", "suite"]
    LIMIT_M_FIELD_NUMBER: _ClassVar[int]
    MAP_FIELD_NUMBER: _ClassVar[int]
    NO_AMBIGUITY_FIELD_NUMBER: _ClassVar[int]
    ROUTE_FILE_FIELD_NUMBER: _ClassVar[int]
    ROUTE_POINTS_FIELD_NUMBER: _ClassVar[int]
    SPEED_MPS_FIELD_NUMBER: _ClassVar[int]
    START_SIGMA_M_FIELD_NUMBER: _ClassVar[int]
    SUITE_FIELD_NUMBER: _ClassVar[int]
    limit_m: float
    map: str
    no_ambiguity: bool
    route_file: bytes
    route_points: RoutePoints
    speed_mps: float
    start_sigma_m: float
    suite: str
    def __init__(self, map: _Optional[str] = ..., suite: _Optional[str] = ..., route_file: _Optional[bytes] = ..., route_points: _Optional[_Union[RoutePoints, _Mapping]] = ..., speed_mps: _Optional[float] = ..., start_sigma_m: _Optional[float] = ..., limit_m: _Optional[float] = ..., no_ambiguity: bool = ...) -> None: ...

class ForecastResponse(_message.Message):
    __slots__ = ["forecast", "progress"]
    FORECAST_FIELD_NUMBER: _ClassVar[int]
    PROGRESS_FIELD_NUMBER: _ClassVar[int]
    forecast: Forecast
    progress: ForecastProgress
    def __init__(self, progress: _Optional[_Union[ForecastProgress, _Mapping]] = ..., forecast: _Optional[_Union[Forecast, _Mapping]] = ...) -> None: ...

class ForecastSample(_message.Message):
    __slots__ = ["position", "protection_m", "radius95_m", "time_s", "way_m"]
    POSITION_FIELD_NUMBER: _ClassVar[int]
    PROTECTION_M_FIELD_NUMBER: _ClassVar[int]
    RADIUS95_M_FIELD_NUMBER: _ClassVar[int]
    TIME_S_FIELD_NUMBER: _ClassVar[int]
    WAY_M_FIELD_NUMBER: _ClassVar[int]
    position: _place_pb2.Position
    protection_m: float
    radius95_m: float
    time_s: float
    way_m: float
    def __init__(self, way_m: _Optional[float] = ..., time_s: _Optional[float] = ..., position: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., radius95_m: _Optional[float] = ..., protection_m: _Optional[float] = ...) -> None: ...

class RoutePoints(_message.Message):
    __slots__ = ["points"]
    POINTS_FIELD_NUMBER: _ClassVar[int]
    points: _containers.RepeatedCompositeFieldContainer[_place_pb2.Position]
    def __init__(self, points: _Optional[_Iterable[_Union[_place_pb2.Position, _Mapping]]] = ...) -> None: ...

class SensorRate(_message.Message):
    __slots__ = ["hz", "sensor"]
    HZ_FIELD_NUMBER: _ClassVar[int]
    SENSOR_FIELD_NUMBER: _ClassVar[int]
    hz: float
    sensor: str
    def __init__(self, sensor: _Optional[str] = ..., hz: _Optional[float] = ...) -> None: ...

class StretchHelp(_message.Message):
    __slots__ = ["after_m", "before_m", "position", "sigma_m", "way_m", "weak_after_m", "weak_before_m", "what"]
    AFTER_M_FIELD_NUMBER: _ClassVar[int]
    BEFORE_M_FIELD_NUMBER: _ClassVar[int]
    POSITION_FIELD_NUMBER: _ClassVar[int]
    SIGMA_M_FIELD_NUMBER: _ClassVar[int]
    WAY_M_FIELD_NUMBER: _ClassVar[int]
    WEAK_AFTER_M_FIELD_NUMBER: _ClassVar[int]
    WEAK_BEFORE_M_FIELD_NUMBER: _ClassVar[int]
    WHAT_FIELD_NUMBER: _ClassVar[int]
    after_m: float
    before_m: float
    position: _place_pb2.Position
    sigma_m: float
    way_m: float
    weak_after_m: float
    weak_before_m: float
    what: str
    def __init__(self, what: _Optional[str] = ..., position: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., way_m: _Optional[float] = ..., sigma_m: _Optional[float] = ..., before_m: _Optional[float] = ..., after_m: _Optional[float] = ..., weak_before_m: _Optional[float] = ..., weak_after_m: _Optional[float] = ...) -> None: ...

class WeakStretch(_message.Message):
    __slots__ = ["from_m", "help", "radius95_m", "to_m", "worst_at_m"]
    FROM_M_FIELD_NUMBER: _ClassVar[int]
    HELP_FIELD_NUMBER: _ClassVar[int]
    RADIUS95_M_FIELD_NUMBER: _ClassVar[int]
    TO_M_FIELD_NUMBER: _ClassVar[int]
    WORST_AT_M_FIELD_NUMBER: _ClassVar[int]
    from_m: float
    help: _containers.RepeatedCompositeFieldContainer[StretchHelp]
    radius95_m: float
    to_m: float
    worst_at_m: float
    def __init__(self, from_m: _Optional[float] = ..., to_m: _Optional[float] = ..., radius95_m: _Optional[float] = ..., worst_at_m: _Optional[float] = ..., help: _Optional[_Iterable[_Union[StretchHelp, _Mapping]]] = ...) -> None: ...
