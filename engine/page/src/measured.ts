// Measurements and what became of them, in words.
import type { Measurement } from "../../client/web/leadline/v1/measurement_pb.js";
import { figure, length, percent, place, speed } from "./format";
import type { LonLat } from "./project";

/** A nuisance's name in words. */
export const nuisanceWords: Record<string, string> = {
  odometer_scale: "odometer's scale",
  gyro_bias_dps: "gyro's bias",
  altimeter_offset_m: "altimeter's offset",
  barometer_offset_m: "barometer's offset",
  tide_m: "tide",
  sound_speed_scale: "speed of sound, scale",
};
export const nuisanceName = (name: string) => nuisanceWords[name] ?? name.replaceAll("_", " ");

const deg = (v: number) => `${figure(v)}°`;

/** What was measured. */
export function measured(m: Measurement | undefined): string {
  const k = m?.kind;
  switch (k?.case) {
    case "travel":
      return `${length(k.value.distanceM)} along the track`;
    case "turn":
      return `turned ${deg(k.value.angleDeg)}`;
    case "displacement":
      return `${length(k.value.eastM)} east, ${length(k.value.northM)} north`;
    case "bodyDisplacement":
      return `${length(k.value.forwardM)} ahead, ${length(k.value.rightM)} right, turned ${deg(k.value.turnDeg)}`;
    case "speed":
      return speed(k.value.mps);
    case "heading":
      return `heading ${deg(k.value.deg)}`;
    case "clearance":
      return `${figure(k.value.clearanceM)} m above ground at ${figure(k.value.altitudeM)} m`;
    case "sounding":
      return `depth ${figure(k.value.depthBelowTransducerM + k.value.transducerDepthM)} m`;
    case "barometer":
      return k.value.reading.case === "pressureHpa" ? `${figure(k.value.reading.value)} hPa` : `altitude ${figure(k.value.reading.value ?? NaN)} m`;
    case "range":
      return `${length(k.value.rangeM)} from a beacon`;
    case "bearing":
      return `beacon at ${deg(k.value.bearingDeg)}`;
    case "acousticBearing":
      return `heard by ${k.value.post} at ${deg(k.value.bearingDeg)}`;
    case "fix":
      return `at ${place({ lon: k.value.lon, lat: k.value.lat } as LonLat, "decimal")}`;
    case "sighting":
      return `${k.value.who || "somebody"}: ${k.value.place.case === "road" ? `on ${k.value.place.value}` : "in an area"}, may be mistaken: ${percent(k.value.mistaken)}`;
    case "standstill":
      return "stands still";
  }
  return "nothing";
}
