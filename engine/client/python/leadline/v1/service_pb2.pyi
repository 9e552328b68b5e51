from leadline.v1 import alarm_pb2 as _alarm_pb2
from leadline.v1 import draw_pb2 as _draw_pb2
from leadline.v1 import feed_pb2 as _feed_pb2
from leadline.v1 import fleet_pb2 as _fleet_pb2
from leadline.v1 import follow_pb2 as _follow_pb2
from leadline.v1 import forecast_pb2 as _forecast_pb2
from leadline.v1 import map_pb2 as _map_pb2
from leadline.v1 import results_pb2 as _results_pb2
from leadline.v1 import traffic_pb2 as _traffic_pb2
from leadline.v1 import trail_pb2 as _trail_pb2
from leadline.v1 import where_pb2 as _where_pb2
from google.protobuf import descriptor as _descriptor
from typing import ClassVar as _ClassVar

DESCRIPTOR: _descriptor.FileDescriptor
