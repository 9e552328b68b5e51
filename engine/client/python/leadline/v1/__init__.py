"""The messages of Leadline's API; the .proto files say what they mean."""
from .belief_pb2 import *
from .drive_pb2 import *
from .feed_pb2 import *
from .fleet_pb2 import *
from .follow_pb2 import *
from .map_pb2 import *
from .measurement_pb2 import *
from .place_pb2 import *
from .posterior_pb2 import *
from .reason_pb2 import *
from .where_pb2 import *
