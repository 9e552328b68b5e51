from google.protobuf import timestamp_pb2 as _timestamp_pb2
from leadline.v1 import place_pb2 as _place_pb2
from google.protobuf.internal import containers as _containers
from google.protobuf.internal import enum_type_wrapper as _enum_type_wrapper
from google.protobuf import descriptor as _descriptor
from google.protobuf import message as _message
from typing import ClassVar as _ClassVar, Iterable as _Iterable, Mapping as _Mapping, Optional as _Optional, Union as _Union

ALARM_KIND_BIAS: AlarmKind
ALARM_KIND_IMPOSSIBLE: AlarmKind
ALARM_KIND_ISOLATED: AlarmKind
ALARM_KIND_SPREAD: AlarmKind
ALARM_KIND_UNSPECIFIED: AlarmKind
DESCRIPTOR: _descriptor.FileDescriptor
STATUS_AMBIGUOUS: Status
STATUS_CONTRADICTED: Status
STATUS_LOCATED: Status
STATUS_OFF_MAP: Status
STATUS_UNSPECIFIED: Status
STATUS_UNSURE: Status

class Alarm(_message.Message):
    __slots__ = ["evidence", "kind", "measurement_kind", "post", "raised", "sensor", "since", "threshold"]
    EVIDENCE_FIELD_NUMBER: _ClassVar[int]
    KIND_FIELD_NUMBER: _ClassVar[int]
    MEASUREMENT_KIND_FIELD_NUMBER: _ClassVar[int]
    POST_FIELD_NUMBER: _ClassVar[int]
    RAISED_FIELD_NUMBER: _ClassVar[int]
    SENSOR_FIELD_NUMBER: _ClassVar[int]
    SINCE_FIELD_NUMBER: _ClassVar[int]
    THRESHOLD_FIELD_NUMBER: _ClassVar[int]
    evidence: float
    kind: AlarmKind
    measurement_kind: str
    post: str
    raised: _timestamp_pb2.Timestamp
    sensor: str
    since: _timestamp_pb2.Timestamp
    threshold: float
    def __init__(self, kind: _Optional[_Union[AlarmKind, str]] = ..., sensor: _Optional[str] = ..., measurement_kind: _Optional[str] = ..., post: _Optional[str] = ..., raised: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., since: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., evidence: _Optional[float] = ..., threshold: _Optional[float] = ...) -> None: ...

class Consistency(_message.Message):
    __slots__ = ["compared", "isolated", "measurement_kind", "post", "score_mean", "score_mean_square", "sensor"]
    COMPARED_FIELD_NUMBER: _ClassVar[int]
    ISOLATED_FIELD_NUMBER: _ClassVar[int]
    MEASUREMENT_KIND_FIELD_NUMBER: _ClassVar[int]
    POST_FIELD_NUMBER: _ClassVar[int]
    SCORE_MEAN_FIELD_NUMBER: _ClassVar[int]
    SCORE_MEAN_SQUARE_FIELD_NUMBER: _ClassVar[int]
    SENSOR_FIELD_NUMBER: _ClassVar[int]
    compared: int
    isolated: bool
    measurement_kind: str
    post: str
    score_mean: float
    score_mean_square: float
    sensor: str
    def __init__(self, sensor: _Optional[str] = ..., measurement_kind: _Optional[str] = ..., post: _Optional[str] = ..., compared: _Optional[int] = ..., score_mean: _Optional[float] = ..., score_mean_square: _Optional[float] = ..., isolated: bool = ...) -> None: ...

class Counts(_message.Message):
    __slots__ = ["accepted", "left_map", "pruned", "refused", "restart"]
    ACCEPTED_FIELD_NUMBER: _ClassVar[int]
    LEFT_MAP_FIELD_NUMBER: _ClassVar[int]
    PRUNED_FIELD_NUMBER: _ClassVar[int]
    REFUSED_FIELD_NUMBER: _ClassVar[int]
    RESTART_FIELD_NUMBER: _ClassVar[int]
    accepted: int
    left_map: float
    pruned: float
    refused: int
    restart: float
    def __init__(self, accepted: _Optional[int] = ..., refused: _Optional[int] = ..., pruned: _Optional[float] = ..., left_map: _Optional[float] = ..., restart: _Optional[float] = ...) -> None: ...

class Direction(_message.Message):
    __slots__ = ["deg", "sigma_deg"]
    DEG_FIELD_NUMBER: _ClassVar[int]
    SIGMA_DEG_FIELD_NUMBER: _ClassVar[int]
    deg: float
    sigma_deg: float
    def __init__(self, deg: _Optional[float] = ..., sigma_deg: _Optional[float] = ...) -> None: ...

class EdgeProbability(_message.Message):
    __slots__ = ["edge", "name", "probability", "twin"]
    EDGE_FIELD_NUMBER: _ClassVar[int]
    NAME_FIELD_NUMBER: _ClassVar[int]
    PROBABILITY_FIELD_NUMBER: _ClassVar[int]
    TWIN_FIELD_NUMBER: _ClassVar[int]
    edge: int
    name: str
    probability: float
    twin: int
    def __init__(self, edge: _Optional[int] = ..., name: _Optional[str] = ..., probability: _Optional[float] = ..., twin: _Optional[int] = ...) -> None: ...

class Evidence(_message.Message):
    __slots__ = ["kind", "log_evidence", "number", "sensor", "withheld"]
    KIND_FIELD_NUMBER: _ClassVar[int]
    LOG_EVIDENCE_FIELD_NUMBER: _ClassVar[int]
    NUMBER_FIELD_NUMBER: _ClassVar[int]
    SENSOR_FIELD_NUMBER: _ClassVar[int]
    WITHHELD_FIELD_NUMBER: _ClassVar[int]
    kind: str
    log_evidence: float
    number: int
    sensor: str
    withheld: bool
    def __init__(self, sensor: _Optional[str] = ..., number: _Optional[int] = ..., kind: _Optional[str] = ..., log_evidence: _Optional[float] = ..., withheld: bool = ...) -> None: ...

class Mode(_message.Message):
    __slots__ = ["covariance", "edges", "mass", "mean"]
    COVARIANCE_FIELD_NUMBER: _ClassVar[int]
    EDGES_FIELD_NUMBER: _ClassVar[int]
    MASS_FIELD_NUMBER: _ClassVar[int]
    MEAN_FIELD_NUMBER: _ClassVar[int]
    covariance: _place_pb2.Covariance
    edges: _containers.RepeatedCompositeFieldContainer[EdgeProbability]
    mass: float
    mean: _place_pb2.Position
    def __init__(self, mass: _Optional[float] = ..., mean: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., covariance: _Optional[_Union[_place_pb2.Covariance, _Mapping]] = ..., edges: _Optional[_Iterable[_Union[EdgeProbability, _Mapping]]] = ...) -> None: ...

class Nuisance(_message.Message):
    __slots__ = ["mean", "name", "sigma", "unit"]
    MEAN_FIELD_NUMBER: _ClassVar[int]
    NAME_FIELD_NUMBER: _ClassVar[int]
    SIGMA_FIELD_NUMBER: _ClassVar[int]
    UNIT_FIELD_NUMBER: _ClassVar[int]
    mean: float
    name: str
    sigma: float
    unit: str
    def __init__(self, name: _Optional[str] = ..., mean: _Optional[float] = ..., sigma: _Optional[float] = ..., unit: _Optional[str] = ...) -> None: ...

class Place(_message.Message):
    __slots__ = ["along_m", "edge", "name", "position", "probability"]
    ALONG_M_FIELD_NUMBER: _ClassVar[int]
    EDGE_FIELD_NUMBER: _ClassVar[int]
    NAME_FIELD_NUMBER: _ClassVar[int]
    POSITION_FIELD_NUMBER: _ClassVar[int]
    PROBABILITY_FIELD_NUMBER: _ClassVar[int]
    along_m: float
    edge: int
    name: str
    position: _place_pb2.Position
    probability: float
    def __init__(self, position: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., probability: _Optional[float] = ..., edge: _Optional[int] = ..., along_m: _Optional[float] = ..., name: _Optional[str] = ...) -> None: ...

class Posterior(_message.Message):
    __slots__ = ["age_s", "alarms", "alert_limit_m", "area_probability", "as_of", "consistency", "counts", "covariance", "durable", "edge_count", "edge_rest", "edges", "entropy_nats", "evidence", "gap_s", "heading", "hindsight_s", "log_evidence", "lost", "lost_alarm", "map", "map_fingerprint", "mean", "mode_count", "mode_rest", "modes", "most_probable", "newer_map_fingerprint", "nuisances", "off_map", "predicted_s", "protection", "radii", "recomputed", "regions", "revises", "speed", "status", "time", "vehicle"]
    AGE_S_FIELD_NUMBER: _ClassVar[int]
    ALARMS_FIELD_NUMBER: _ClassVar[int]
    ALERT_LIMIT_M_FIELD_NUMBER: _ClassVar[int]
    AREA_PROBABILITY_FIELD_NUMBER: _ClassVar[int]
    AS_OF_FIELD_NUMBER: _ClassVar[int]
    CONSISTENCY_FIELD_NUMBER: _ClassVar[int]
    COUNTS_FIELD_NUMBER: _ClassVar[int]
    COVARIANCE_FIELD_NUMBER: _ClassVar[int]
    DURABLE_FIELD_NUMBER: _ClassVar[int]
    EDGES_FIELD_NUMBER: _ClassVar[int]
    EDGE_COUNT_FIELD_NUMBER: _ClassVar[int]
    EDGE_REST_FIELD_NUMBER: _ClassVar[int]
    ENTROPY_NATS_FIELD_NUMBER: _ClassVar[int]
    EVIDENCE_FIELD_NUMBER: _ClassVar[int]
    GAP_S_FIELD_NUMBER: _ClassVar[int]
    HEADING_FIELD_NUMBER: _ClassVar[int]
    HINDSIGHT_S_FIELD_NUMBER: _ClassVar[int]
    LOG_EVIDENCE_FIELD_NUMBER: _ClassVar[int]
    LOST_ALARM_FIELD_NUMBER: _ClassVar[int]
    LOST_FIELD_NUMBER: _ClassVar[int]
    MAP_FIELD_NUMBER: _ClassVar[int]
    MAP_FINGERPRINT_FIELD_NUMBER: _ClassVar[int]
    MEAN_FIELD_NUMBER: _ClassVar[int]
    MODES_FIELD_NUMBER: _ClassVar[int]
    MODE_COUNT_FIELD_NUMBER: _ClassVar[int]
    MODE_REST_FIELD_NUMBER: _ClassVar[int]
    MOST_PROBABLE_FIELD_NUMBER: _ClassVar[int]
    NEWER_MAP_FINGERPRINT_FIELD_NUMBER: _ClassVar[int]
    NUISANCES_FIELD_NUMBER: _ClassVar[int]
    OFF_MAP_FIELD_NUMBER: _ClassVar[int]
    PREDICTED_S_FIELD_NUMBER: _ClassVar[int]
    PROTECTION_FIELD_NUMBER: _ClassVar[int]
    RADII_FIELD_NUMBER: _ClassVar[int]
    RECOMPUTED_FIELD_NUMBER: _ClassVar[int]
    REGIONS_FIELD_NUMBER: _ClassVar[int]
    REVISES_FIELD_NUMBER: _ClassVar[int]
    SPEED_FIELD_NUMBER: _ClassVar[int]
    STATUS_FIELD_NUMBER: _ClassVar[int]
    TIME_FIELD_NUMBER: _ClassVar[int]
    VEHICLE_FIELD_NUMBER: _ClassVar[int]
    age_s: float
    alarms: _containers.RepeatedCompositeFieldContainer[Alarm]
    alert_limit_m: float
    area_probability: float
    as_of: _timestamp_pb2.Timestamp
    consistency: _containers.RepeatedCompositeFieldContainer[Consistency]
    counts: Counts
    covariance: _place_pb2.Covariance
    durable: bool
    edge_count: int
    edge_rest: float
    edges: _containers.RepeatedCompositeFieldContainer[EdgeProbability]
    entropy_nats: float
    evidence: _containers.RepeatedCompositeFieldContainer[Evidence]
    gap_s: float
    heading: Direction
    hindsight_s: float
    log_evidence: float
    lost: float
    lost_alarm: bool
    map: str
    map_fingerprint: str
    mean: _place_pb2.Position
    mode_count: int
    mode_rest: float
    modes: _containers.RepeatedCompositeFieldContainer[Mode]
    most_probable: Place
    newer_map_fingerprint: str
    nuisances: _containers.RepeatedCompositeFieldContainer[Nuisance]
    off_map: float
    predicted_s: float
    protection: Protection
    radii: Radii
    recomputed: bool
    regions: _containers.RepeatedCompositeFieldContainer[Region]
    revises: bool
    speed: SpeedEstimate
    status: Status
    time: _timestamp_pb2.Timestamp
    vehicle: str
    def __init__(self, time: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., vehicle: _Optional[str] = ..., map: _Optional[str] = ..., map_fingerprint: _Optional[str] = ..., status: _Optional[_Union[Status, str]] = ..., mean: _Optional[_Union[_place_pb2.Position, _Mapping]] = ..., covariance: _Optional[_Union[_place_pb2.Covariance, _Mapping]] = ..., most_probable: _Optional[_Union[Place, _Mapping]] = ..., modes: _Optional[_Iterable[_Union[Mode, _Mapping]]] = ..., mode_count: _Optional[int] = ..., mode_rest: _Optional[float] = ..., heading: _Optional[_Union[Direction, _Mapping]] = ..., speed: _Optional[_Union[SpeedEstimate, _Mapping]] = ..., edges: _Optional[_Iterable[_Union[EdgeProbability, _Mapping]]] = ..., edge_count: _Optional[int] = ..., edge_rest: _Optional[float] = ..., radii: _Optional[_Union[Radii, _Mapping]] = ..., regions: _Optional[_Iterable[_Union[Region, _Mapping]]] = ..., area_probability: _Optional[float] = ..., protection: _Optional[_Union[Protection, _Mapping]] = ..., nuisances: _Optional[_Iterable[_Union[Nuisance, _Mapping]]] = ..., entropy_nats: _Optional[float] = ..., evidence: _Optional[_Iterable[_Union[Evidence, _Mapping]]] = ..., log_evidence: _Optional[float] = ..., counts: _Optional[_Union[Counts, _Mapping]] = ..., gap_s: _Optional[float] = ..., durable: bool = ..., revises: bool = ..., as_of: _Optional[_Union[_timestamp_pb2.Timestamp, _Mapping]] = ..., age_s: _Optional[float] = ..., predicted_s: _Optional[float] = ..., hindsight_s: _Optional[float] = ..., newer_map_fingerprint: _Optional[str] = ..., alarms: _Optional[_Iterable[_Union[Alarm, _Mapping]]] = ..., consistency: _Optional[_Iterable[_Union[Consistency, _Mapping]]] = ..., off_map: _Optional[float] = ..., lost: _Optional[float] = ..., lost_alarm: bool = ..., alert_limit_m: _Optional[float] = ..., recomputed: bool = ...) -> None: ...

class Protection(_message.Message):
    __slots__ = ["radius_m", "risk", "unbounded_reason"]
    RADIUS_M_FIELD_NUMBER: _ClassVar[int]
    RISK_FIELD_NUMBER: _ClassVar[int]
    UNBOUNDED_REASON_FIELD_NUMBER: _ClassVar[int]
    radius_m: float
    risk: float
    unbounded_reason: str
    def __init__(self, risk: _Optional[float] = ..., radius_m: _Optional[float] = ..., unbounded_reason: _Optional[str] = ...) -> None: ...

class Radii(_message.Message):
    __slots__ = ["radius50_m", "radius95_m", "radius99_m"]
    RADIUS50_M_FIELD_NUMBER: _ClassVar[int]
    RADIUS95_M_FIELD_NUMBER: _ClassVar[int]
    RADIUS99_M_FIELD_NUMBER: _ClassVar[int]
    radius50_m: float
    radius95_m: float
    radius99_m: float
    def __init__(self, radius50_m: _Optional[float] = ..., radius95_m: _Optional[float] = ..., radius99_m: _Optional[float] = ...) -> None: ...

class Region(_message.Message):
    __slots__ = ["area_m2", "fraction", "pixel_m", "polygons", "probability"]
    AREA_M2_FIELD_NUMBER: _ClassVar[int]
    FRACTION_FIELD_NUMBER: _ClassVar[int]
    PIXEL_M_FIELD_NUMBER: _ClassVar[int]
    POLYGONS_FIELD_NUMBER: _ClassVar[int]
    PROBABILITY_FIELD_NUMBER: _ClassVar[int]
    area_m2: float
    fraction: float
    pixel_m: float
    polygons: _containers.RepeatedCompositeFieldContainer[_place_pb2.Polygon]
    probability: float
    def __init__(self, fraction: _Optional[float] = ..., probability: _Optional[float] = ..., polygons: _Optional[_Iterable[_Union[_place_pb2.Polygon, _Mapping]]] = ..., area_m2: _Optional[float] = ..., pixel_m: _Optional[float] = ...) -> None: ...

class SpeedEstimate(_message.Message):
    __slots__ = ["mps", "sigma_mps"]
    MPS_FIELD_NUMBER: _ClassVar[int]
    SIGMA_MPS_FIELD_NUMBER: _ClassVar[int]
    mps: float
    sigma_mps: float
    def __init__(self, mps: _Optional[float] = ..., sigma_mps: _Optional[float] = ...) -> None: ...

class Withdrawn(_message.Message):
    __slots__ = ["times"]
    TIMES_FIELD_NUMBER: _ClassVar[int]
    times: _containers.RepeatedCompositeFieldContainer[_timestamp_pb2.Timestamp]
    def __init__(self, times: _Optional[_Iterable[_Union[_timestamp_pb2.Timestamp, _Mapping]]] = ...) -> None: ...

class Status(int, metaclass=_enum_type_wrapper.EnumTypeWrapper):
    __slots__ = []

class AlarmKind(int, metaclass=_enum_type_wrapper.EnumTypeWrapper):
    __slots__ = []
