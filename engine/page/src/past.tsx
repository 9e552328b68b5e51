// Past runs: what they said at any time, two side by side.
import { effect, signal } from "@preact/signals";
import { useEffect } from "preact/hooks";
import { MapKind, type MapDescription } from "../../client/web/leadline/v1/map_pb.js";
import type { EndedDrive } from "../../client/web/leadline/v1/trail_pb.js";
import type { ResultDescription } from "../../client/web/leadline/v1/results_pb.js";
import { Code, ConnectError } from "@connectrpc/connect";
import { calls, sentence, soon } from "./api";
import { clockTimes, length, utcTime } from "./format";
import { link, order } from "./live";
import { drawCircle, drawMark, drawTrack } from "./paint";
import { Plot } from "./plot";
import type { LonLat } from "./project";
import { momentAt, ofResult, ofTable, ofVehicle, worst, type Moment, type Run } from "./runs";
import { lookAt, stage } from "./stage";

const maps = signal<MapDescription[]>([]);
/** As chosen; empty if the runs say it. */
const map = signal("");
/** Files that have been read, by name. */
const files = signal<Record<string, Run>>({});
/** Results in the server's folder, and what is to be said of them. */
const results = signal<ResultDescription[]>([]);
const about = signal("");
const first = signal<Run | undefined>(undefined);
const second = signal<Run | undefined>(undefined);
const at = signal(0);
const trouble = signal("");

const stampOf = (ms: number) => ({ seconds: BigInt(Math.floor(ms / 1000)), nanos: Math.round((ms % 1000) * 1e6) });

/** The map that a run is drawn on: the chosen one, its own, or one that its places lie in. */
function mapOf(r: Run): string {
  const p = r.moments[0].at;
  const inside = (m: MapDescription) => p.lon >= m.southWest!.lon! && p.lon <= m.northEast!.lon! && p.lat >= m.southWest!.lat! && p.lat <= m.northEast!.lat!;
  const fits = maps.value.filter(inside);
  return map.value || r.map || maps.value.find((m) => m.fingerprint === r.fingerprint)?.name || (fits.find((m) => (m.kind === MapKind.ROADS) === r.roads) ?? fits[0])?.name || "";
}

/** What was chosen last: an answer that comes later than the next choice is passed over. */
const wished = new Map<typeof first, string>();

/** The run that a choice stands for. */
async function runOf(choice: string): Promise<Run | undefined> {
  const [, kind, name] = /^(\w*) ?(.*)$/s.exec(choice)!;
  switch (kind) {
    case "file":
      return files.value[name];
    case "result":
      return ofResult(name);
    case "vehicle":
      return ofVehicle(name);
    case "drive": {
      const [vehicle, drive] = JSON.parse(name) as [string, string];
      return ofVehicle(vehicle, drive);
    }
  }
}

async function choose(which: typeof first, name: string) {
  trouble.value = "";
  wished.set(which, name);
  try {
    const run = await runOf(name);
    if (wished.get(which) !== name) return;
    which.value = run && { ...run, key: name };
    if (run && which === first) at.value = run.moments[0].ms;
  } catch (e) {
    if (wished.get(which) !== name) return;
    which.value = undefined;
    trouble.value = e instanceof Error && !("code" in e) ? e.message : sentence(e);
  }
}

async function load(list: FileList | null) {
  const wrong: string[] = [];
  for (const f of list ?? []) {
    try {
      const r = await ofTable(f);
      // Files of two settings have one name.
      let name = f.name;
      for (let i = 2; files.value[name]; i++) name = `${f.name} (${i})`;
      r.name = name;
      files.value = { ...files.value, [name]: r };
      const which = first.value ? second : first;
      await choose(which, "file " + name);
    } catch (e) {
      wrong.push((e as Error).message);
    }
  }
  trouble.value = wrong.join(" ");
}

/** Drives that have ended and made room for others. */
const ended = signal<EndedDrive[]>([]);

async function listEnded() {
  try {
    ended.value = (await calls.listEndedDrives({ pageSize: mostListed }, soon)).drives;
  } catch {
    ended.value = []; // the drives that are here say what is wrong
  }
}

/** As many results as are listed. */
const mostListed = 1000;

/** Asks which results the server has. */
async function list() {
  try {
    const page = await calls.listResults({ pageSize: mostListed }, { timeoutMs: 60_000 });
    results.value = page.results;
    about.value = page.nextPageToken ? `The first ${mostListed} results of the server's folder are listed.` : "";
  } catch (e) {
    results.value = [];
    const { code } = ConnectError.from(e);
    // A server without a folder, and a caller who is no analyst, have no list.
    about.value = code === Code.Unimplemented ? "" : code === Code.PermissionDenied ? "Results of the server's folder are for analysts." : sentence(e);
  }
}

/** Goes to a time, and shows where that was. */
function go(ms: number) {
  at.value = ms;
  const r = first.value ?? second.value;
  if (r) lookAt.value = momentAt(r, ms).at;
}

const runs = (): Run[] => [first.value, second.value].filter((r): r is Run => r !== undefined);

/** From when to when there is something to see, ms. */
function span(): [number, number] {
  const all = runs();
  return [Math.min(...all.map((r) => r.moments[0].ms)), Math.max(...all.map((r) => r.moments[r.moments.length - 1].ms))];
}

export function PastRuns() {
  useEffect(() => {
    void list();
    void listEnded();
    void calls.listMaps({}, soon).then((m) => (maps.value = m.maps)).catch((e) => (trouble.value = sentence(e)));
  }, [link.value.state]);
  useEffect(() => {
    const off = effect(() => {
      const all = runs();
      const on = all.map(mapOf).find((m) => m) ?? "";
      const ms = at.value;
      stage.value = all.length && on
        ? {
            key: `past ${on} ${all.map((r) => r.name).join(" ")}`,
            map: on,
            label: "past runs",
            points: all.flatMap((r) => r.moments.map((m) => m.at)),
            paint: (ctx, v, g, d) => {
              const en = (p: LonLat) => g.frame.forward(p);
              all.forEach((r, i) => {
                drawTrack(ctx, v, r.moments.map((m) => (m.located ? en(m.at) : undefined)), d, i === 0 ? "track" : "area");
                const m = momentAt(r, ms);
                drawCircle(ctx, v, en(m.at), m.radius95M, i === 0 ? [] : [6, 4], d);
                drawMark(ctx, v, en(m.at), all.length > 1 ? String(i + 1) : "", all.length > 1 ? "disc" : "cross", d);
                if (m.truth) drawMark(ctx, v, en(m.truth), "truth", "square", d);
              });
            },
            legend: <Legend two={all.length > 1} truth={all.some((r) => r.moments[0].truth)} />,
          }
        : undefined;
    });
    return () => {
      off();
      stage.value = undefined;
    };
  }, []);
  const all = runs();
  return (
    <>
      <form onSubmit={(e) => e.preventDefault()} onDragOver={(e) => e.preventDefault()} onDrop={(e) => (e.preventDefault(), void load(e.dataTransfer?.files ?? null))}>
        <Choice words="First run" name="first" which={first} />
        <Choice words="Second run" name="second" which={second} />
        <label>
          Map{" "}
          <select name="map" value={map.value} onChange={(e) => (map.value = e.currentTarget.value)}>
            <option value="">as they say</option>
            {maps.value.map((m) => (
              <option key={m.name} value={m.name}>{m.name}</option>
            ))}
          </select>
        </label>
        <label>
          Results of a study <input type="file" name="table" multiple accept=".csv" aria-describedby="past-trouble" onChange={(e) => void load(e.currentTarget.files)} />
        </label>
        <p class="hint">A track.csv that leadline replay --out wrote, or two, of two settings; they may be dropped here. They stay in the browser.</p>
      </form>
      {about.value && <p class="hint">{about.value}</p>}
      {results.value.filter((r) => r.trouble).slice(0, 20).map((r) => (
        <p key={r.name} class="note bad">{r.trouble}.</p>
      ))}
      <p role="alert" class="bad" id="past-trouble">{trouble.value}</p>
      {all.length === 0 ? <p class="empty">Choose a drive that the server keeps, or load results.</p> : <Compared all={all} />}
    </>
  );
}

function Choice({ words, name, which }: { words: string; name: string; which: typeof first }) {
  const r = which.value;
  return (
    <label>
      {words}{" "}
      <select name={name} value={r?.key ?? ""} onChange={(e) => void choose(which, e.currentTarget.value)}>
        <option value="">none</option>
        {order.value.map((v) => (
          <option key={v} value={"vehicle " + v}>{v}, as the server keeps it</option>
        ))}
        {ended.value.map((d) => {
          const key = "drive " + JSON.stringify([d.vehicle, d.drive]);
          return (
            <option key={key} value={key}>
              {d.vehicle}, drive {d.drive}, ended{d.time ? `, to ${utcTime(d.time)} UTC` : ""}
            </option>
          );
        })}
        {results.value.filter((q) => !q.trouble).map((q) => (
          <option key={"result " + q.name} value={"result " + q.name}>
            {q.name}{q.p95M === undefined ? "" : `, 95 % of errors within ${length(q.p95M)}`}{q.partial ? ", stopped early" : ""}
          </option>
        ))}
        {Object.keys(files.value).map((f) => (
          <option key={f} value={"file " + f}>{f}</option>
        ))}
      </select>
    </label>
  );
}

const metres = (m: number) => (Number.isNaN(m) ? "not known" : length(m));

function Compared({ all }: { all: Run[] }) {
  const [from, to] = span();
  const ms = Math.min(Math.max(at.value, from), to);
  const now = all.map((r) => momentAt(r, ms));
  // Of what goes together in the chart the worst is drawn.
  const steps = 600;
  const times = Array.from({ length: steps }, (_, i) => (from + ((to - from) * (i + 0.5)) / steps) / 1000);
  const line = (r: Run, of: (m: Moment) => number) => {
    const out: (number | null)[] = Array(steps).fill(null);
    for (const m of r.moments) {
      const i = Math.min(steps - 1, Math.floor(((m.ms - from) / Math.max(to - from, 1)) * steps));
      const v = of(m);
      if (Number.isFinite(v)) out[i] = Math.max(out[i] ?? 0, v, 0.01);
    }
    return out;
  };
  const colours = ["first", "second"] as const;
  const chart = (title: string, of: (m: Moment) => number) => (
    <Plot
      title={title}
      unit="m"
      log
      span
      mark={ms / 1000}
      times={times}
      says={all.map((r, i) => `${r.name} ${metres(of(now[i]))}`).join(", ")}
      lines={all.map((r, i) => ({ label: r.name, values: line(r, of), colour: colours[i], dash: i ? [6, 4] : undefined }))}
    />
  );
  const events = all.flatMap((r) => r.events.map((e) => ({ ...e, name: r.name }))).sort((a, b) => a.ms - b.ms);
  return (
    <section aria-label="Past runs over time">
      <label for="past-time">
        Time <output id="past-now">{clockTimes(stampOf(ms))}</output>
      </label>
      <input id="past-time" type="range" min={from} max={to} step="any" value={ms} aria-valuetext={utcTime(stampOf(ms))} onInput={(e) => (at.value = e.currentTarget.valueAsNumber)} />
      <div class="choices">
        {all.map((r, i) => (
          <button key={i} type="button" onClick={() => go(worst(r))}>
            To the worst stretch{all.length > 1 ? ` of ${i ? "the second" : "the first"}` : ""}
          </button>
        ))}
      </div>
      <table id="past-figures">
        <caption>At that time</caption>
        <thead>
          <tr>
            <th>What</th>
            {all.map((r, i) => (
              <th key={i}>{r.name}</th>
            ))}
          </tr>
        </thead>
        <tbody>
          {(
            [
              ["Status", (m) => m.status],
              ["95 % within", (m) => metres(m.radius95M)],
              ["Protected within", (m) => metres(m.protectionM)],
              ["Error", (m) => metres(m.errorM)],
            ] as [string, (m: Moment) => string][]
          ).map(([words, of]) => (
            <tr key={words}>
              <th scope="row">{words}</th>
              {now.map((m, i) => (
                <td key={i}>{of(m)}</td>
              ))}
            </tr>
          ))}
        </tbody>
      </table>
      {chart("95 % radius", (m) => m.radius95M)}
      {all.some((r) => r.moments.some((m) => Number.isFinite(m.errorM))) && chart("Error", (m) => m.errorM)}
      {all.length > 1 && (
        <p class="key">
          <i class="line first" /> first <i class="line second" /> second
        </p>
      )}
      {events.length > 0 && (
        <table>
          <caption>Alarms in their place</caption>
          <tbody>
            {events.slice(0, 200).map((e, i) => (
              <tr key={i}>
                <td>
                  <button type="button" onClick={() => go(e.ms)}>{utcTime(stampOf(e.ms)).slice(11)}</button>
                </td>
                <td>{e.name}</td>
                <td>{e.what}</td>
              </tr>
            ))}
          </tbody>
        </table>
      )}
    </section>
  );
}

function Legend({ two, truth }: { two: boolean; truth: boolean }) {
  return (
    <ul>
      <li><i class="sign track" /> {two ? "first run" : "track"} while located</li>
      {two && <li><i class="sign track second" /> second run</li>}
      <li><i class="sign circle" /> 95 % circle{two ? ", the second's dashed" : ""}</li>
      {truth && <li><i class="sign fix" /> truth</li>}
    </ul>
  );
}
