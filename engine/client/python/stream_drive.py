#!/usr/bin/env python3
"""Streams a drive file to a Leadline server and prints the posteriors that come back."""
import argparse
import sys

import grpc
from google.protobuf import json_format

import leadline
from leadline import v1


def read(path):
    """Reads a drive file: its header, and its measurements in the order of time."""
    header, measurements = None, []
    with open(path, encoding="utf-8") as lines:
        for number, line in enumerate(lines, 1):
            if not line.strip():
                continue
            try:
                record = json_format.Parse(line, v1.DriveRecord())
            except json_format.ParseError as e:
                sys.exit(f"{path}:{number}: {e}")
            if record.HasField("header"):
                header = record.header
            elif record.HasField("measurement"):
                number = record.number if record.HasField("number") else number
                measurements.append(v1.SensorMeasurement(time=record.time, sensor=record.sensor, number=number, measurement=record.measurement))
    if header is None:
        sys.exit(f"{path}: no header: begin the file with one")
    return header, sorted(measurements, key=lambda m: m.time.ToNanoseconds())


def main():
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("drive", help="a drive file, NAME.drive.jsonl")
    parser.add_argument("--to", default="127.0.0.1:7700", help="address of the server")
    parser.add_argument("--batch", type=int, default=64, help="measurements sent together")
    given = parser.parse_args()
    header, measurements = read(given.drive)
    try:
        with leadline.Client(given.to) as client, client.open(header) as drive:
            for i in range(0, len(measurements), given.batch):
                for p in drive.send(measurements[i : i + given.batch]):
                    status = v1.Status.Name(p.status).removeprefix("STATUS_").lower()
                    print(f"{p.time.ToJsonString()} {status} {p.mean.lon:.6f} {p.mean.lat:.6f} 95% within {p.radii.radius95_m:.1f} m")
            closed = drive.end()
            for r in drive.refusals:
                print(f"refused: {r.time.ToJsonString()} {r.sensor} {v1.Reason.Name(r.reason)}: {r.detail}", file=sys.stderr)
            print(f"{closed.posteriors} posteriors, sha256 {closed.posterior_sha256}")
    except grpc.RpcError as e:
        sys.exit(f"{given.to}: {e.details()}")


if __name__ == "__main__":
    main()
