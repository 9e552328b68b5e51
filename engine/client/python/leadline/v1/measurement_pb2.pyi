from google.protobuf import timestamp_pb2 as _timestamp_pb2
from leadline.v1 import place_pb2 as _place_pb2
from google.protobuf.internal import containers as _containers
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Iterable as _Iterable, Mapping as _Mapping, Optional as _Optional, Union as _Union

DESCRIPTOR: _descriptor.FileDescriptor

class AcousticBearing(_message.Message):
    __slots__ = ["bearing_deg", "post", "sigma_deg"]
    BEARING_DEG_FIELD_NUMBER: _ClassVar[int]
    POST_FIELD_NUMBER: _ClassVar[int]
    SIGMA_DEG_FIELD_NUMBER: _ClassVar[int]
    bearing_deg: float
    post: str
    sigma_deg: float
    def __init__(self, post: _Optional[str] = ..., bearing_deg: _Optional[float] = ..., sigma_deg: _Optional[float] = ...) -> None: ...

class Barometer(_message.Message):
    __slots__ = ["altitude_m", "pressure_hpa", "sigma_m"]
    ALTITUDE_M_FIELD_NUMBER: _ClassVar[int]
    PRESSURE_HPA_FIELD_NUMBER: _ClassVar[int]
    SIGMA_M_FIELD_NUMBER: _ClassVar[int]
    altitude_m: float
    pressure_hpa: float
    sigma_m: float
    def __init__(self, altitude_m: _Optional[float] = ..., pressure_hpa: _Optional[float] = ..., sigma_m: _Optional[float] = ...) -> None: ...

class Beacon(_message.Message):
    __slots__ = ["id", "position"]
    ID_FIELD_NUMBER: _ClassVar[int]
    POSITION_FIELD_NUMBER: _ClassVar[int]
    id: str
    position: _place_pb2.Position
    def __init__(self, id: _Optional[str] = ..., position: _Optional[_Union[_place_pb2.Position, _Mapping]] = ...) -> None: ...

class Beam(_message.Message):
    __slots__ = ["depth_below_transducer_m", "forward_m", "right_m", "sigma_m"]
    DEPTH_BELOW_TRANSDUCER_M_FIELD_NUMBER: _ClassVar[int]
    FORWARD_M_FIELD_NUMBER: _ClassVar[int]
    RIGHT_M_FIELD_NUMBER: _ClassVar[int]
    SIGMA_M_FIELD_NUMBER: _ClassVar[int]
    depth_below_transducer_m: float
    forward_m: float
    right_m: float
    sigma_m: float
    def __init__(self, forward_m: _Optional[float] = ..., right_m: _Optional[float] = ..., depth_below_transducer_m: _Optional[float] = ..., sigma_m: _Optional[float] = ...) -> None: ...

class Bearing(_message.Message):
    __slots__ = ["beacon", "bearing_deg", "sigma_deg"]
    BEACON_FIELD_NUMBER: _ClassVar[int]
    BEARING_DEG_FIELD_NUMBER: _ClassVar[int]
    SIGMA_DEG_FIELD_NUMBER: _ClassVar[int]
    beacon: Beacon
    bearing_deg: float
    sigma_deg: float
    def __init__(self, beacon: _Optional[_Union[Beacon, _Mapping]] = ..., bearing_deg: _Optional[float] = ..., sigma_deg: _Optional[float] = ...) -> None: ...

class BodyDisplacement(_message.Message):
    __slots__ = ["forward_m", "right_m", "sigma_forward_m", "sigma_right_m", "sigma_turn_deg", "since", "turn_deg"]
    FORWARD_M_FIELD_NUMBER: _ClassVar[int]
    RIGHT_M_FIELD_NUMBER: _ClassVar[int]
    SIGMA_FORWARD_M_FIELD_NUMBER: _ClassVar[int]
    SIGMA_RIGHT_M_FIELD_NUMBER: _ClassVar[int]
    SIGMA_TURN_DEG_FIELD_NUMBER: _ClassVar[int]
    SINCE_FIELD_NUMBER: _ClassVar[int]
    TURN_DEG_FIELD_NUMBER: _ClassVar[int]
    forward_m: float
    right_m: float
    sigma_forward_m: float
    sigma_right_m: float
    sigma_turn_deg: float
    since: _timestamp_pb2.Timestamp
    turn_deg: float
    def __init__(self, since: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., forward_m: _Optional[float] = ..., right_m: _Optional[float] = ..., turn_deg: _Optional[float] = ..., sigma_forward_m: _Optional[float] = ..., sigma_right_m: _Optional[float] = ..., sigma_turn_deg: _Optional[float] = ...) -> None: ...

class Clearance(_message.Message):
    __slots__ = ["altitude_m", "clearance_m", "sigma_m"]
    ALTITUDE_M_FIELD_NUMBER: _ClassVar[int]
    CLEARANCE_M_FIELD_NUMBER: _ClassVar[int]
    SIGMA_M_FIELD_NUMBER: _ClassVar[int]
    altitude_m: float
    clearance_m: float
    sigma_m: float
    def __init__(self, clearance_m: _Optional[float] = ..., altitude_m: _Optional[float] = ..., sigma_m: _Optional[float] = ...) -> None: ...

class Displacement(_message.Message):
    __slots__ = ["covariance", "east_m", "north_m", "since"]
    COVARIANCE_FIELD_NUMBER: _ClassVar[int]
    EAST_M_FIELD_NUMBER: _ClassVar[int]
    NORTH_M_FIELD_NUMBER: _ClassVar[int]
    SINCE_FIELD_NUMBER: _ClassVar[int]
    covariance: _place_pb2.Covariance
    east_m: float
    north_m: float
    since: _timestamp_pb2.Timestamp
    def __init__(self, since: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., east_m: _Optional[float] = ..., north_m: _Optional[float] = ..., covariance: _Optional[_Union[_place_pb2.Covariance, _Mapping]] = ...) -> None: ...

class Fix(_message.Message):
    __slots__ = ["lat", "lon", "sigma_m"]
    LAT_FIELD_NUMBER: _ClassVar[int]
    LON_FIELD_NUMBER: _ClassVar[int]
    SIGMA_M_FIELD_NUMBER: _ClassVar[int]
    lat: float
    lon: float
    sigma_m: float
    def __init__(self, lon: _Optional[float] = ..., lat: _Optional[float] = ..., sigma_m: _Optional[float] = ...) -> None: ...

class Heading(_message.Message):
    __slots__ = ["deg", "sigma_deg"]
    DEG_FIELD_NUMBER: _ClassVar[int]
    SIGMA_DEG_FIELD_NUMBER: _ClassVar[int]
    deg: float
    sigma_deg: float
    def __init__(self, deg: _Optional[float] = ..., sigma_deg: _Optional[float] = ...) -> None: ...

class Measurement(_message.Message):
    __slots__ = ["acoustic_bearing", "barometer", "bearing", "body_displacement", "clearance", "displacement", "fix", "heading", "range", "sighting", "sounding", "speed", "standstill", "travel", "turn"]
    ACOUSTIC_BEARING_FIELD_NUMBER: _ClassVar[int]
    BAROMETER_FIELD_NUMBER: _ClassVar[int]
    BEARING_FIELD_NUMBER: _ClassVar[int]
    BODY_DISPLACEMENT_FIELD_NUMBER: _ClassVar[int]
    CLEARANCE_FIELD_NUMBER: _ClassVar[int]
    DISPLACEMENT_FIELD_NUMBER: _ClassVar[int]
    FIX_FIELD_NUMBER: _ClassVar[int]
    HEADING_FIELD_NUMBER: _ClassVar[int]
    RANGE_FIELD_NUMBER: _ClassVar[int]
    SIGHTING_FIELD_NUMBER: _ClassVar[int]
    SOUNDING_FIELD_NUMBER: _ClassVar[int]
    SPEED_FIELD_NUMBER: _ClassVar[int]
    STANDSTILL_FIELD_NUMBER: _ClassVar[int]
    TRAVEL_FIELD_NUMBER: _ClassVar[int]
    TURN_FIELD_NUMBER: _ClassVar[int]
    acoustic_bearing: AcousticBearing
    barometer: Barometer
    bearing: Bearing
    body_displacement: BodyDisplacement
    clearance: Clearance
    displacement: Displacement
    fix: Fix
    heading: Heading
    range: Range
    sighting: Sighting
    sounding: Sounding
    speed: Speed
    standstill: Standstill
    travel: Travel
    turn: Turn
    def __init__(self, travel: _Optional[_Union[Travel, _Mapping]] = ..., turn: _Optional[_Union[Turn, _Mapping]] = ..., displacement: _Optional[_Union[Displacement, _Mapping]] = ..., body_displacement: _Optional[_Union[BodyDisplacement, _Mapping]] = ..., speed: _Optional[_Union[Speed, _Mapping]] = ..., heading: _Optional[_Union[Heading, _Mapping]] = ..., clearance: _Optional[_Union[Clearance, _Mapping]] = ..., sounding: _Optional[_Union[Sounding, _Mapping]] = ..., barometer: _Optional[_Union[Barometer, _Mapping]] = ..., range: _Optional[_Union[Range, _Mapping]] = ..., bearing: _Optional[_Union[Bearing, _Mapping]] = ..., acoustic_bearing: _Optional[_Union[AcousticBearing, _Mapping]] = ..., fix: _Optional[_Union[Fix, _Mapping]] = ..., sighting: _Optional[_Union[Sighting, _Mapping]] = ..., standstill: _Optional[_Union[Standstill, _Mapping]] = ...) -> None: ...

class Range(_message.Message):
    __slots__ = ["beacon", "range_m", "sigma_m"]
    BEACON_FIELD_NUMBER: _ClassVar[int]
    RANGE_M_FIELD_NUMBER: _ClassVar[int]
    SIGMA_M_FIELD_NUMBER: _ClassVar[int]
    beacon: Beacon
    range_m: float
    sigma_m: float
    def __init__(self, beacon: _Optional[_Union[Beacon, _Mapping]] = ..., range_m: _Optional[float] = ..., sigma_m: _Optional[float] = ...) -> None: ...

class SensorMeasurement(_message.Message):
    __slots__ = ["measurement", "number", "sensor", "time"]
    MEASUREMENT_FIELD_NUMBER: _ClassVar[int]
    NUMBER_FIELD_NUMBER: _ClassVar[int]
    SENSOR_FIELD_NUMBER: _ClassVar[int]
    TIME_FIELD_NUMBER: _ClassVar[int]
    measurement: Measurement
    number: int
    sensor: str
    time: _timestamp_pb2.Timestamp
    def __init__(self, time: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., sensor: _Optional[str] = ..., number: _Optional[int] = ..., measurement: _Optional[_Union[Measurement, _Mapping]] = ...) -> None: ...

class Sighting(_message.Message):
    __slots__ = ["area", "mistaken", "road", "who"]
    AREA_FIELD_NUMBER: _ClassVar[int]
    MISTAKEN_FIELD_NUMBER: _ClassVar[int]
    ROAD_FIELD_NUMBER: _ClassVar[int]
    WHO_FIELD_NUMBER: _ClassVar[int]
    area: _place_pb2.Polygon
    mistaken: float
    road: str
    who: str
    def __init__(self, area: _Optional[_Union[_place_pb2.Polygon, _Mapping]] = ..., road: _Optional[str] = ..., mistaken: _Optional[float] = ..., who: _Optional[str] = ...) -> None: ...

class Sounding(_message.Message):
    __slots__ = ["beams", "depth_below_transducer_m", "sigma_m", "transducer_depth_m"]
    BEAMS_FIELD_NUMBER: _ClassVar[int]
    DEPTH_BELOW_TRANSDUCER_M_FIELD_NUMBER: _ClassVar[int]
    SIGMA_M_FIELD_NUMBER: _ClassVar[int]
    TRANSDUCER_DEPTH_M_FIELD_NUMBER: _ClassVar[int]
    beams: _containers.RepeatedCompositeFieldContainer[Beam]
    depth_below_transducer_m: float
    sigma_m: float
    transducer_depth_m: float
    def __init__(self, depth_below_transducer_m: _Optional[float] = ..., transducer_depth_m: _Optional[float] = ..., sigma_m: _Optional[float] = ..., beams: _Optional[_Iterable[_Union[Beam, _Mapping]]] = ...) -> None: ...

class Speed(_message.Message):
    __slots__ = ["course_deg", "mps", "sigma_mps"]
    COURSE_DEG_FIELD_NUMBER: _ClassVar[int]
    MPS_FIELD_NUMBER: _ClassVar[int]
    SIGMA_MPS_FIELD_NUMBER: _ClassVar[int]
    course_deg: float
    mps: float
    sigma_mps: float
    def __init__(self, mps: _Optional[float] = ..., sigma_mps: _Optional[float] = ..., course_deg: _Optional[float] = ...) -> None: ...

class Standstill(_message.Message):
    __slots__ = []
    def __init__(self) -> None: ...

class Travel(_message.Message):
    __slots__ = ["distance_m", "sigma_m", "since"]
    DISTANCE_M_FIELD_NUMBER: _ClassVar[int]
    SIGMA_M_FIELD_NUMBER: _ClassVar[int]
    SINCE_FIELD_NUMBER: _ClassVar[int]
    distance_m: float
    sigma_m: float
    since: _timestamp_pb2.Timestamp
    def __init__(self, since: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., distance_m: _Optional[float] = ..., sigma_m: _Optional[float] = ...) -> None: ...

class Turn(_message.Message):
    __slots__ = ["angle_deg", "sigma_deg", "since"]
    ANGLE_DEG_FIELD_NUMBER: _ClassVar[int]
    SIGMA_DEG_FIELD_NUMBER: _ClassVar[int]
    SINCE_FIELD_NUMBER: _ClassVar[int]
    angle_deg: float
    sigma_deg: float
    since: _timestamp_pb2.Timestamp
    def __init__(self, since: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., angle_deg: _Optional[float] = ..., sigma_deg: _Optional[float] = ...) -> None: ...
