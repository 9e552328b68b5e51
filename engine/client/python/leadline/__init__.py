"""Feeds a vehicle's measurements to a Leadline server and asks where vehicles are.

    with leadline.Client("127.0.0.1:7700") as client:
        with client.open({"vehicle": "van-1", "map": "quillmere"}) as drive:
            for posterior in drive.send([{"time": "2030-05-01T12:00:15Z", "measurement": {"fix": {...}}}]):
                print(posterior.mean.lon, posterior.mean.lat)
            print(drive.end().posterior_sha256)
        print(client.where("van-1").answers[0].posterior.status)
        for news in client.follow("van-1"):
            print(news.posterior.time.ToJsonString())

Messages are those of leadline.v1, or dicts written as in drive files. Failures are grpc.RpcError: code()
and details() say what was wrong. It needs the packages grpcio and protobuf.

An aid and not certified: a position may be wrong although it is called located.
"""
import queue
import random
import secrets
import threading
import time

import grpc
from google.protobuf import json_format

from leadline import v1

_SERVICE = "/leadline.v1.PositionService/"
_OPTIONS = [
    ("grpc.max_receive_message_length", 16 << 20), ("grpc.max_reconnect_backoff_ms", 2_000),
    # What the other machine does not take in time ends the connection, too: one that is cut off ends none.
    ("grpc.keepalive_time_ms", 11_000), ("grpc.keepalive_timeout_ms", 5_000),
]


def _message(kind, given):
    return given if isinstance(given, kind) else json_format.ParseDict(given, kind())


def _read(path):
    with open(path, "rb") as f:
        return f.read()


def _away(e, deadline=False):
    """Whether an error says that another try, or another server, may do. A call over a channel that was left is
    cancelled."""
    codes = [grpc.StatusCode.UNAVAILABLE, grpc.StatusCode.CANCELLED]
    return e.code() in codes or deadline and e.code() == grpc.StatusCode.DEADLINE_EXCEEDED


class Client:
    """A connection to a server, HOST:PORT, or to one of several that share their vehicles, with commas between
    them: to another one when a call says that one is away or cut off. patience_s is how long to try again when it is away. With tls it is encrypted,
    and with a file of authorities, ca, or of one's own certificate, cert and key; all PEM. token is a bearer
    token, or a function that gives one for each call; without encryption it goes to this machine alone."""

    def __init__(self, address, patience_s=60, tls=False, ca=None, cert=None, key=None, token=None):
        self.patience_s, self._token, self._turning = patience_s, token, threading.Lock()
        self._addresses = [a.strip() for a in address.split(",")]
        random.shuffle(self._addresses)  # so that not all vehicles begin with the same one
        encrypted = tls or ca or cert or key
        if token and not encrypted and any(a.rpartition(":")[0] not in ("127.0.0.1", "[::1]", "localhost") for a in self._addresses):
            raise ValueError("a token would go in the clear to another machine: give tls=True")
        self._secure = grpc.ssl_channel_credentials(*(_read(f) if f else None for f in (ca, key, cert))) if encrypted else None
        self._dial()

    def _dial(self):
        if self._secure:
            self._channel = grpc.secure_channel(self._addresses[0], self._secure, options=_OPTIONS)
        else:
            self._channel = grpc.insecure_channel(self._addresses[0], options=_OPTIONS)
        call = lambda kind, name, request, response: kind(_SERVICE + name, request.SerializeToString, response.FromString)
        self._feed = call(self._channel.stream_stream, "Feed", v1.FeedRequest, v1.FeedResponse)
        self._where = call(self._channel.unary_unary, "Where", v1.WhereRequest, v1.WhereResponse)
        self._follow = call(self._channel.unary_stream, "Follow", v1.FollowRequest, v1.FollowResponse)

    def _turn(self, channel):
        """Goes to the next server, unless that has been done since a call of a channel failed. Other calls over
        that one end, and are made again."""
        with self._turning:
            if len(self._addresses) == 1 or channel is not self._channel:
                return
            self._addresses.append(self._addresses.pop(0))
            self._dial()
        channel.close()

    def __enter__(self):
        return self

    def __exit__(self, *_):
        self._channel.close()

    def _shown(self):
        """What a call shows of who makes it."""
        token = self._token() if callable(self._token) else self._token
        return [("authorization", "Bearer " + token)] if token else []

    def where(self, *vehicles, timeout_s=10, **wishes):
        """Says where vehicles are; wishes are further fields of WhereRequest."""
        request, until = v1.WhereRequest(vehicles=vehicles, **wishes), time.monotonic() + timeout_s
        for left in reversed(range(len(self._addresses))):
            channel = self._channel
            try:
                timeout = max(until - time.monotonic(), 0) / (left + 1)
                return self._where(request, timeout=timeout, metadata=self._shown())
            except grpc.RpcError as e:
                if not left or not _away(e, deadline=True):
                    raise
                self._turn(channel)

    def follow(self, *vehicles, **wishes):
        """Tells of vehicles as they move on, of all if none is named; wishes are further fields of
        FollowRequest. When the stream breaks, it goes on after what has been told."""
        request, tries = v1.FollowRequest(vehicles=vehicles, **wishes), 0
        while True:
            channel = self._channel
            stream, began = self._follow(request, metadata=self._shown()), time.monotonic()
            try:
                for news in stream:
                    request.resume_token = news.resume_token
                    yield news
                return
            except grpc.RpcError as e:
                tries = tries + 1 if time.monotonic() < began + 5 else 1
                if e.code() == grpc.StatusCode.INVALID_ARGUMENT and request.resume_token:
                    request.resume_token = ""  # the server has begun anew
                elif not _away(e) or tries > self.patience_s:
                    raise
                self._turn(channel)
                time.sleep(1)
            finally:
                stream.cancel()

    def open(self, header, drive="", replace=False, every=False, onward=False):
        """Opens a drive. To continue one, give its name again, and send the same batches from the first on,
        which are not sent twice, or with onward those that come after what the server has. replace gives up
        another drive of the vehicle; every asks for every posterior instead of each batch's last."""
        opening = v1.Open(header=_message(v1.DriveHeader, header), drive=drive or secrets.token_hex(8), replace=replace)
        opening.reply = v1.REPLY_EVERY if every else v1.REPLY_LATEST
        return Drive(self, opening, onward)


class Drive:
    """An open drive, for one thread. opened is what the server said of it; refusals and withdrawn gather
    what it refused, and the times of posteriors that hold no more."""

    def __init__(self, client, opening, onward):
        self.refusals, self.withdrawn = [], []
        self._client, self._opening = client, opening
        self._connect()
        self._sent = self.opened.sequence if onward else 0

    def __enter__(self):
        return self

    def __exit__(self, *_):
        """Breaks off. A drive that has not been ended can be continued."""
        self._requests.put(None)
        self._stream.cancel()

    def _connect(self):
        self._requests, self._lost = queue.SimpleQueue(), False
        self._channel = self._client._channel
        self._stream = self._client._feed(iter(self._requests.get, None), metadata=self._client._shown())
        self._requests.put(v1.FeedRequest(open=self._opening))
        try:
            self.opened = next(self._stream).opened
        except BaseException:
            self.__exit__()
            raise

    def send(self, measurements):
        """Sends a batch, waits until the server has it, and returns the posteriors that it released."""
        self._sent += 1
        if self._sent <= self.opened.sequence:
            return []
        batch = v1.Batch(sequence=self._sent, measurements=[_message(v1.SensorMeasurement, m) for m in measurements])
        return self._ask(v1.FeedRequest(batch=batch))[0]

    def end(self):
        """Ends the drive and returns the server's last word, a Closed."""
        return self._ask(v1.FeedRequest(end=v1.End()))[1]

    def _ask(self, request):
        posteriors, until = [], time.monotonic() + self._client.patience_s
        while True:
            try:
                if self._lost:
                    self._connect()
                self._requests.put(request)
                for response in self._stream:
                    kind = response.WhichOneof("message")
                    if kind == "posterior":
                        posteriors.append(response.posterior)
                    elif kind == "withdrawn":
                        self.withdrawn.extend(response.withdrawn.times)
                    elif kind == "receipt":
                        self.refusals.extend(response.receipt.refusals)
                        return posteriors, None
                    elif kind == "closed":
                        return posteriors, response.closed
                raise RuntimeError("the server ended the stream without a word")
            except grpc.RpcError as e:
                if not _away(e) or time.monotonic() > until:
                    raise
                self.__exit__()
                self._client._turn(self._channel)
                self._lost = True
                time.sleep(1)
