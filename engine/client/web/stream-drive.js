#!/usr/bin/env node
// Streams a drive file to a Leadline server and prints the posteriors that come
// back: node stream-drive.js DRIVE [HOST:PORT]
import { readFileSync } from "node:fs";
import { create, fromJsonString } from "@bufbuild/protobuf";
import { timestampDate } from "@bufbuild/protobuf/wkt";
import { connect } from "./node.js";
import { DriveRecordSchema } from "./leadline/v1/drive_pb.js";
import { SensorMeasurementSchema } from "./leadline/v1/measurement_pb.js";
import { Status } from "./leadline/v1/posterior_pb.js";
import { Reason } from "./leadline/v1/reason_pb.js";

const [path, address = "127.0.0.1:7700"] = process.argv.slice(2);
const batch = 64;

if (!path || process.argv.length > 4) {
  console.error("usage: node stream-drive.js DRIVE [HOST:PORT]");
  process.exit(2);
}

/** Reads a drive file: its header, and its measurements in the order of time. */
function read() {
  let header;
  const measurements = [];
  readFileSync(path, "utf8").split("\n").forEach((line, i) => {
    if (!line.trim()) return;
    const { time, sensor, number = BigInt(i + 1), record } = fromJsonString(DriveRecordSchema, line);
    if (record.case === "header") header = record.value;
    if (record.case === "measurement") measurements.push(create(SensorMeasurementSchema, { time, sensor, number, measurement: record.value }));
  });
  const when = ({ time }) => time.seconds * 1_000_000_000n + BigInt(time.nanos);
  return { header, measurements: measurements.sort((a, b) => Number(when(a) - when(b))) };
}

const client = connect(address);
try {
  const { header, measurements } = read();
  const drive = await client.open(header);
  for (let i = 0; i < measurements.length; i += batch) {
    for (const p of await drive.send(measurements.slice(i, i + batch))) {
      console.log(timestampDate(p.time).toISOString(), Status[p.status].toLowerCase(), p.mean.lon.toFixed(6), p.mean.lat.toFixed(6), `95% within ${p.radii.radius95M.toFixed(1)} m`);
    }
  }
  const closed = await drive.end();
  for (const r of drive.refusals) console.error("refused:", r.sensor, Reason[r.reason], r.detail);
  console.log(`${closed.posteriors} posteriors, sha256 ${closed.posteriorSha256}`);
} catch (e) {
  console.error(`${address}: ${e.rawMessage ?? e}`);
  process.exitCode = 1;
} finally {
  client.close();
}
