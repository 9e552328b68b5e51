// How good positions will be along a planned route.
import { effect, signal } from "@preact/signals";
import { useEffect, useMemo } from "preact/hooks";
import type { Forecast, ForecastRequestSchema, WeakStretch } from "../../client/web/leadline/v1/forecast_pb.js";
import { MapKind, type MapDescription } from "../../client/web/leadline/v1/map_pb.js";
import type { MessageInitShape } from "@bufbuild/protobuf";
import { calls, sentence, soon } from "./api";
import { css } from "./colour";
import { duration, figure, length, percent, some } from "./format";
import { close as latest, link } from "./live";
import { drawArea, drawMark } from "./paint";
import { Plot } from "./plot";
import { tool, way } from "./pointing";
import type { LonLat } from "./project";
import { drawRibbon, ribbonScale } from "./ribbon";
import { dark, units } from "./settings";
import { lookAt, stage } from "./stage";

const maps = signal<MapDescription[]>([]);
const suites = signal<string[]>([]);
const trouble = signal("");
const map = signal("");
const suite = signal("");
const file = signal<{ name: string; text: Uint8Array } | undefined>(undefined);
/** Speed, m/s, and what else is asked, as typed. */
const speedMps = signal(10);
const byFile = signal(false);
const startM = signal(10);
const limitM = signal(0);
const alike = signal(true);
const progress = signal<{ done: number; total: number } | undefined>(undefined);
const forecast = signal<Forecast | undefined>(undefined);
let running: AbortController | undefined;

/** As much as the server takes. */
const largestFile = 2 << 20;

async function load() {
  try {
    const [m, s] = await Promise.all([calls.listMaps({}, soon), calls.listSuites({}, soon)]);
    maps.value = m.maps;
    suites.value = s.suites;
    trouble.value = "";
    if (!map.value) chooseMap(m.maps.find((d) => d.name === latest.value?.posterior.map)?.name ?? m.maps[0]?.name ?? "");
  } catch (e) {
    trouble.value = sentence(e);
  }
}

function chooseMap(name: string) {
  giveUp();
  trouble.value = "";
  map.value = name;
  forecast.value = undefined;
  way.value = [];
  file.value = undefined;
  const roads = maps.value.find((m) => m.name === name)?.kind === MapKind.ROADS;
  const fits = (s: string) => /truck|car|van/.test(s) === roads;
  if (!suite.value || !fits(suite.value)) suite.value = suites.value.find(fits) ?? suites.value[0] ?? "";
}

function giveUp() {
  running?.abort();
  running = undefined;
  progress.value = undefined;
}

/** Takes a file as the route. */
async function take(f: File | undefined) {
  if (!f) return;
  if (f.size > largestFile) { // the route before it stays
    trouble.value = `The file ${f.name} has ${figure(f.size / 2 ** 20)} MiB, and a route at most 2: simplify it, or leave the other features out.`;
    return;
  }
  giveUp();
  forecast.value = undefined;
  trouble.value = "";
  way.value = [];
  tool.value = "none";
  file.value = { name: f.name, text: new Uint8Array(await f.arrayBuffer()) };
}

async function ask() {
  giveUp();
  if (!file.value && way.value.length < 2) {
    trouble.value = "There is no route yet: draw one on the map, or load a file.";
    return;
  }
  trouble.value = "";
  forecast.value = undefined;
  progress.value = { done: 0, total: 1 };
  tool.value = "none";
  const mine = (running = new AbortController());
  const request: MessageInitShape<typeof ForecastRequestSchema> = {
    map: map.value,
    suite: suite.value,
    route: file.value ? { case: "routeFile", value: file.value.text } : { case: "routePoints", value: { points: way.value } },
    speedMps: file.value && byFile.value ? 0 : speedMps.value,
    startSigmaM: startM.value,
    ...(limitM.value > 0 && { limitM: limitM.value }),
    noAmbiguity: !alike.value,
  };
  try {
    for await (const m of calls.forecast(request, { signal: mine.signal })) {
      if (mine !== running) return;
      if (m.news.case === "progress") progress.value = m.news.value;
      else if (m.news.case === "forecast") forecast.value = m.news.value;
    }
  } catch (e) {
    if (mine === running) trouble.value = sentence(e);
  }
  if (mine === running) giveUp();
}

export function Ahead() {
  useEffect(() => void load(), [link.value.state]);
  useEffect(() => {
    const off = effect(() => {
      const [f, drawn] = [forecast.value, way.value];
      const line = f?.samples.map((s) => s.position as LonLat) ?? [];
      stage.value = map.value
        ? {
            key: `ahead ${map.value} ${f ? `${f.lengthM} ${line[0]?.lon} ${line[0]?.lat}` : ""}`,
            map: map.value,
            label: f ? "the planned route, coloured by the forecast radius" : "the planned route",
            points: line,
            paint: (ctx, v, g, d) => {
              if (!f) {
                drawArea(ctx, v, drawn.map((p) => g.frame.forward(p)), false, d);
                return;
              }
              drawRibbon(ctx, v, line.map((p) => g.frame.forward(p)), f.samples.map((s) => s.radius95M), f.limitM, d);
              for (const w of f.weak) {
                const h = w.help[0];
                if (h) drawMark(ctx, v, g.frame.forward(h.position as LonLat), h.what, "square", d);
              }
            },
            legend: f && <Legend f={f} />,
          }
        : undefined;
    });
    return () => {
      off();
      giveUp();
      tool.value = "none";
      stage.value = undefined;
    };
  }, []);
  return (
    <>
      <Form />
      <p role="alert" class="bad" id="ahead-trouble">{trouble.value}</p>
      {progress.value && (
        <p role="status">
          {progress.value.done === 0 ? "Waiting for its turn, and laying the route on the map." : "Forecasting."}{" "}
          <progress max={progress.value.total} value={progress.value.done} aria-label="How far the forecast is" />
        </p>
      )}
      {forecast.value && <Result f={forecast.value} />}
    </>
  );
}

function Form() {
  const nautical = units.value === "nautical";
  const per = nautical ? 1852 / 3600 : 1 / 3.6;
  const number = (e: { currentTarget: HTMLInputElement }, set: (v: number) => void) => e.currentTarget.valueAsNumber > 0 && set(e.currentTarget.valueAsNumber);
  return (
    <form
      onSubmit={(e) => {
        e.preventDefault();
        void ask();
      }}
      onDragOver={(e) => e.preventDefault()}
      onDrop={(e) => {
        e.preventDefault();
        void take(e.dataTransfer?.files[0]);
      }}
    >
      <label>
        Map{" "}
        <select name="map" value={map.value} onChange={(e) => chooseMap(e.currentTarget.value)}>
          {maps.value.map((m) => (
            <option key={m.name} value={m.name}>{m.name}</option>
          ))}
        </select>
      </label>
      <label>
        Sensors, by suite{" "}
        <select name="suite" value={suite.value} onChange={(e) => (suite.value = e.currentTarget.value)}>
          {suites.value.map((s) => (
            <option key={s} value={s}>{s}</option>
          ))}
        </select>
      </label>
      <div class="choices" role="group" aria-label="The route">
        <button
          type="button"
          aria-pressed={tool.value === "route"}
          onClick={() => {
            if (tool.value === "route") tool.value = "none";
            else {
              giveUp();
              trouble.value = "";
              forecast.value = file.value = undefined;
              tool.value = "route";
            }
          }}
        >
          Draw the route
        </button>
        {way.value.length > 0 && !file.value && (
          <>
            <button type="button" onClick={() => ((forecast.value = undefined), (way.value = way.value.slice(0, -1)))}>
              Take back the last point
            </button>
            <button type="button" onClick={() => ((forecast.value = undefined), (way.value = []))}>
              Forget it
            </button>
          </>
        )}
        <label>
          or a file <input type="file" name="route" accept=".geojson,.json,.gpx" aria-describedby="ahead-trouble" onChange={(e) => void take(e.currentTarget.files?.[0])} />
        </label>
      </div>
      <p class="hint">
        {tool.value === "route"
          ? `Click on the map along the way; or go to it by keyboard and press space with each point under the cross. ${way.value.length} so far.`
          : file.value
            ? `${file.value.name}, ${figure(Math.max(file.value.text.length, 100) / 1000, 2)} kB.`
            : way.value.length > 1
              ? `A drawn route of ${some(way.value.length, "point")}.`
              : "GeoJSON with one LineString, or GPX with one route or track; it may be dropped here."}
      </p>
      <label>
        Speed{" "}
        <input type="number" name="speed" min="0.1" step="any" disabled={!!file.value && byFile.value} value={figure(speedMps.value / per)} onChange={(e) => number(e, (v) => (speedMps.value = v * per))} /> {nautical ? "kn" : "km/h"}
      </label>
      {file.value && (
        <label>
          <input type="checkbox" checked={byFile.value} onChange={(e) => (byFile.value = e.currentTarget.checked)} /> by the times in the file
        </label>
      )}
      <label>
        Start known to <input type="number" name="start" min="0.001" max="1000000" step="any" value={startM.value} onChange={(e) => number(e, (v) => (startM.value = v))} /> m
      </label>
      <label>
        Wanted within{" "}
        <input type="number" name="limit" min="0" max="1000000" step="any" placeholder="the suite's" value={limitM.value || ""} onChange={(e) => (limitM.value = e.currentTarget.valueAsNumber || 0)} /> m
      </label>
      <label>
        <input type="checkbox" checked={alike.value} onChange={(e) => (alike.value = e.currentTarget.checked)} /> Look for places that are alike, which takes longer
      </label>
      <div class="choices">
        <button>Forecast</button>
        {progress.value && (
          <button type="button" onClick={giveUp}>
            Give it up
          </button>
        )}
      </div>
    </form>
  );
}

function Legend({ f }: { f: Forecast }) {
  const scale = ribbonScale(f.samples.map((s) => s.radius95M), dark.value);
  return (
    <div>
      <div class="ramp" style={{ background: `linear-gradient(to right, ${scale.colours.map((c) => css(c)).join(",")})` }} />
      <div class="ends">
        <span>{length(scale.least)}</span>
        <span>{length(scale.most)}</span>
      </div>
      <div>forecast 95 % radius</div>
      <ul>
        <li><i class="sign wide" /> beyond {length(f.limitM)}</li>
        {f.weak.some((w) => w.help.length > 0) && <li><i class="sign fix" /> where a fix or a beacon would help</li>}
      </ul>
    </div>
  );
}

/** What would help a stretch, in words. */
function help(w: WeakStretch): string {
  const h = w.help[0];
  if (!h) return "neither one fix nor one beacon";
  return `a ${h.what} good to ${length(h.sigmaM)}, ${length(h.wayM)} along: at worst ${length(h.afterM)} instead of ${length(h.beforeM)}`;
}

function Result({ f }: { f: Forecast }) {
  const along = useMemo(() => f.samples.map((s) => s.wayM), [f]);
  const unsure = f.alike.filter((a) => a.ambiguity >= 0.05);
  const at = (m: number) => f.samples.reduce((best, s) => (Math.abs(s.wayM - m) < Math.abs(best.wayM - m) ? s : best)).position as LonLat;
  return (
    <section aria-label="Forecast">
      <p class="lead" role="status" id="ahead-answer">
        {length(f.lengthM)} in {duration(f.durationS)}: 95 % within {length(f.medianRadius95M)} on half of the way, {length(f.worstRadius95M)} at worst, {f.worstAtM < 1 ? "at its start" : `${length(f.worstAtM)} along`}.{" "}
        {f.beyondLimit > 0 ? `Beyond ${length(f.limitM)} on ${percent(f.beyondLimit)} of the way.` : `Nowhere beyond ${length(f.limitM)}.`}
      </p>
      <Plot
        title="Forecast 95 % radius"
        unit="m"
        log
        over="the way"
        times={along}
        says={`at worst ${length(f.worstRadius95M)}, limit ${length(f.limitM)}`}
        lines={[
          { label: "95 % radius", values: f.samples.map((s) => Math.max(s.radius95M, 0.01)), colour: "first" },
          { label: "wanted", values: f.samples.map(() => f.limitM), colour: "second", dash: [6, 4] },
        ]}
      />
      <p class="key"><i class="line first" /> 95 % radius <i class="line second" /> wanted</p>
      {f.weak.length > 0 && (
        <table id="weak">
          <caption>Weak stretches</caption>
          <thead>
            <tr><th>Along the way</th><th>At worst</th><th>What would help</th></tr>
          </thead>
          <tbody>
            {f.weak.map((w) => (
              <tr key={w.fromM}>
                <td>
                  <button type="button" onClick={() => (lookAt.value = at(w.worstAtM))}>
                    {length(w.fromM)} to {length(w.toM)}
                  </button>
                </td>
                <td>{length(w.radius95M)}</td>
                <td>{help(w)}</td>
              </tr>
            ))}
          </tbody>
        </table>
      )}
      {unsure.length > 0 && (
        <table>
          <caption>Places that others are like</caption>
          <thead>
            <tr><th>Along the way</th><th>Elsewhere after it</th><th>Located after</th></tr>
          </thead>
          <tbody>
            {unsure.map((a) => (
              <tr key={a.fromM}>
                <td>
                  <button type="button" onClick={() => (lookAt.value = at((a.fromM + a.toM) / 2))}>
                    {length(a.fromM)} to {length(a.toM)}
                  </button>
                </td>
                <td>{percent(a.ambiguity)}</td>
                <td>{a.locatedM === undefined ? "not so soon" : length(a.locatedM)}</td>
              </tr>
            ))}
          </tbody>
        </table>
      )}
      {f.alike.length > 0 && (
        <p class="hint">
          {unsure.length === 0 ? "No stretch is like another place. " : ""}Counted for somebody who hardly knows the place at a stretch's beginning.
        </p>
      )}
      <p class="hint">
        Counted on: {f.rates.map((r) => `${r.sensor} at ${figure(r.hz)} Hz`).join(", ")}.{f.leftOut.length > 0 && ` Not on: ${f.leftOut.join(", ")}.`} A radius is a bound: no estimate errs less.
      </p>
    </section>
  );
}
