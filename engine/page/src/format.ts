// Figures in words.
import { units } from "./settings";
import { utm, type LonLat } from "./project";

/** A number to so many significant figures, without an exponent where one can do without. */
export function figure(v: number, digits = 3): string {
  if (!Number.isFinite(v)) return "–";
  const size = Math.abs(v);
  if (size === 0) return "0";
  if (size < 1e-6 || size >= 1e7) return v.toExponential(digits - 1).replace("-", "−");
  return Number(v.toPrecision(digits)).toLocaleString("en", { maximumFractionDigits: 9, useGrouping: false }).replace("-", "−");
}

const mile = 1852;

/** A length of so many metres. */
export function length(m: number): string {
  if (!Number.isFinite(m)) return "unbounded";
  if (units.value === "nautical" && Math.abs(m) >= 0.1 * mile) return `${figure(m / mile)}\u00a0NM`;
  if (Math.abs(m) >= 10_000) return `${figure(m / 1000)}\u00a0km`;
  return `${figure(m, Math.abs(m) < 100 ? 2 : 3)}\u00a0m`;
}

/** A speed of so many metres a second. */
export function speed(mps: number): string {
  return units.value === "nautical" ? `${figure((mps * 3600) / mile)}\u00a0kn` : `${figure(mps * 3.6)}\u00a0km/h`;
}

export function percent(p: number): string {
  if (p > 0 && p < 0.01) return p < 1e-6 ? "under 0.0001\u00a0%" : `${Number((100 * p).toPrecision(1))}\u00a0%`;
  if (p < 1 && p > 0.99) return `${Number(Math.min(100 * p, 99.9999).toFixed(p > 0.999 ? 3 : 1))}\u00a0%`;
  return `${Math.round(100 * p)}\u00a0%`;
}

/** So many of something; its plural has an s. */
export const some = (n: number | bigint, one: string) => `${n} ${one}${Number(n) === 1 ? "" : "s"}`;

/** A duration of so many seconds. */
export function duration(s: number): string {
  const v = Math.abs(s);
  if (v < 100) return `${Math.round(v)} s`;
  if (v < 100 * 60) return `${Math.round(v / 60)} min`;
  if (v < 72 * 3600) return `${Math.round(v / 3600)} h`;
  if (v < 2 * 365 * 86400) return `${Math.round(v / 86400)} days`;
  return `${figure(v / (365.25 * 86400))} years`;
}

export type Stamp = { seconds: bigint; nanos: number };

export const millis = (t: Stamp) => Number(t.seconds) * 1000 + t.nanos / 1e6;

/** A time of day, local and UTC together. */
export function clockTimes(t: Stamp): string {
  const d = new Date(millis(t));
  const zone = -d.getTimezoneOffset();
  const sign = zone < 0 ? "−" : "+";
  const [h, m] = [Math.floor(Math.abs(zone) / 60), Math.abs(zone) % 60];
  return `${utcTime(t)} UTC, ${clockOf(d)} here (UTC${sign}${h}${m ? ":" + two(m) : ""})`;
}

export const utcTime = (t: Stamp) => new Date(millis(t)).toISOString().slice(0, 19).replace("T", " ");

const two = (v: number) => String(v).padStart(2, "0");
const clockOf = (d: Date) => `${two(d.getHours())}:${two(d.getMinutes())}:${two(d.getSeconds())}`;

export type CoordinateForm = "decimal" | "minutes" | "utm";

/** A place in the chosen form. */
export function place(p: LonLat, form: CoordinateForm): string {
  if (form === "decimal") return `${p.lat.toFixed(6)}, ${p.lon.toFixed(6)}`;
  if (form === "minutes") return `${minutes(p.lat, "N", "S", 2)} ${minutes(p.lon, "E", "W", 3)}`;
  const g = utm(p);
  if (!g) return "no UTM zone so near a pole";
  return `${g.zone}${g.band} ${Math.round(g.e)} E ${Math.round(g.n)} N`;
}

function minutes(deg: number, plus: string, minus: string, width: number): string {
  // Rounded first, so that there are never 60 minutes.
  const total = Math.round(Math.abs(deg) * 60_000);
  const whole = String(Math.floor(total / 60_000)).padStart(width, "0");
  return `${whole}° ${((total % 60_000) / 1000).toFixed(3).padStart(6, "0")}′ ${deg < 0 ? minus : plus}`;
}

/** Reads a place as `place` writes it, decimal or in degrees and minutes. */
export function readPlace(text: string): LonLat | undefined {
  const decimal = /^\s*([-+]?\d+(?:\.\d+)?)\s*[,; ]\s*([-+]?\d+(?:\.\d+)?)\s*$/.exec(text);
  let p: LonLat | undefined;
  if (decimal) p = { lat: Number(decimal[1]), lon: Number(decimal[2]) };
  const angles = /^\s*(\d+)\s*°\s*([\d.]+)\s*[′']?\s*([NS])[,; ]*\s*(\d+)\s*°\s*([\d.]+)\s*[′']?\s*([EW])\s*$/i.exec(text);
  if (angles) {
    const [lat, lon] = [Number(angles[1]) + Number(angles[2]) / 60, Number(angles[4]) + Number(angles[5]) / 60];
    p = { lat: /s/i.test(angles[3]) ? -lat : lat, lon: /w/i.test(angles[6]) ? -lon : lon };
  }
  return p && Math.abs(p.lat) <= 90 && Math.abs(p.lon) <= 180 ? p : undefined;
}
