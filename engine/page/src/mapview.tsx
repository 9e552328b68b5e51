// The map of the chosen vehicle.
import { Status } from "../../client/web/leadline/v1/posterior_pb.js";
import { batch, computed, effect, signal } from "@preact/signals";
import { useEffect, useRef } from "preact/hooks";
import { beliefScale, css, decades, ground as groundColour } from "./colour";
import { figure, length, percent } from "./format";
import { ground, groundTrouble, refine, type Box, type Ground } from "./ground";
import { chosen, chosenKnown, close as latest, fix, past } from "./live";
import { beginTop } from "./paintall";
import { begin, boxOf, drawGround, lay, toEN, writeNames, type View } from "./paint";
import { leftOut, placeBelief, type Placed } from "./paintbelief";
import { PlacesButton } from "./placesview";
import { places, placesHidden, takePlaces } from "./places";
import { close, closed, corners, point, spot, tool } from "./pointing";
import type { EN, LonLat } from "./project";
import { dark } from "./settings";
import { lookAt, stage, type Stage } from "./stage";
import { onRoads, radiiHold } from "./worry";

const view = signal<View>({ e: 0, n: 0, mPerPx: 2, width: 0, height: 0 });
/** Whether the map goes along with the vehicle. */
const along = signal(true);
const fitted = signal(""); // vehicle and map that the view was made for

const current = computed(() => (stage.value ? undefined : (latest.value?.posterior ?? chosenKnown.value?.posterior)));
const mapName = computed(() => stage.value?.map ?? current.value?.map);
const under = computed<Ground | undefined>(() => stage.value?.ground ?? (mapName.value ? ground(mapName.value).value : undefined));

/** How long the last drawing of a belief took, ms: placing and painting. */
export const took = { place: 0, paint: 0 };

function fit(g: Ground, at: EN, radiusM: number) {
  const v = view.peek();
  const most = Math.max(g.whole.box.east - g.whole.box.west, g.whole.box.north - g.whole.box.south, 500);
  const reach = Math.min(Math.max(radiusM * 2.2, 250), most * 0.6);
  view.value = { ...v, e: at.e, n: at.n, mPerPx: Math.max((2 * reach) / Math.max(200, Math.min(v.width, v.height)), 0.05) };
}

const fitMap = (g: Ground) => fitBox(g.whole.box);

/** Fits the view to the points of a stage, or to its map. */
function fitStage(g: Ground, s: Stage) {
  const at = s.points.map((p) => g.frame.forward(p));
  if (at.length === 0) return fitMap(g);
  const [e, n] = [at.map((p) => p.e), at.map((p) => p.n)];
  const room = 100;
  fitBox({ west: Math.min(...e) - room, east: Math.max(...e) + room, south: Math.min(...n) - room, north: Math.max(...n) + room });
}

function fitBox(b: Box) {
  const v = view.peek();
  along.value = false;
  view.value = {
    ...v,
    e: (b.west + b.east) / 2,
    n: (b.south + b.north) / 2,
    mPerPx: 1.08 * Math.max((b.east - b.west) / Math.max(v.width, 1), (b.north - b.south) / Math.max(v.height, 1), 0.05),
  };
}

function zoom(by: number, x?: number, y?: number) {
  const v = view.peek();
  const m = Math.min(Math.max(v.mPerPx * by, 0.02), 5000);
  if (x === undefined || y === undefined || along.peek()) {
    view.value = { ...v, mPerPx: m };
    return;
  }
  const at = toEN(v, x, y);
  view.value = { ...v, mPerPx: m, e: at.e - (x - v.width / 2) * m, n: at.n + (y - v.height / 2) * m };
}

function pan(dx: number, dy: number) {
  const v = view.peek();
  along.value = false;
  view.value = { ...v, e: v.e + dx * v.mPerPx, n: v.n - dy * v.mPerPx };
}

/** The way from one drawing to the next, for those who look at frames. */
function draws(run: () => void) {
  let asked = 0;
  const off = effect(() => {
    // Everything that is drawn is read here, so that the effect runs again.
    void [view.value, under.value, latest.value, past.value, fix.value, dark.value, spot.value, corners.value, closed.value, current.value, stage.value, lookAt.value, places.value, placesHidden.value];
    if (!asked) asked = requestAnimationFrame(() => ((asked = 0), run()));
  });
  return () => {
    off();
    cancelAnimationFrame(asked);
  };
}

/** The names of roads and places, drawn with the ground and laid over beliefs. */
const names = document.createElement("canvas");

let placedOf: unknown;
let placed: Placed | undefined;

function belief(g: Ground): Placed | undefined {
  const c = latest.peek();
  const b = c?.belief;
  if (!b || c.posterior.map !== g.map) return undefined;
  const key = `${dark.peek()}`;
  if (placedOf !== b || placedDark !== key) {
    const began = performance.now();
    [placed, placedOf, placedDark] = [placeBelief(b, g.frame, dark.peek()), b, key];
    took.place = performance.now() - began;
  }
  return placed;
}
let placedDark = "";

export function MapView() {
  const box = useRef<HTMLDivElement>(null);
  const low = useRef<HTMLCanvasElement>(null);
  const top = useRef<HTMLCanvasElement>(null);

  useEffect(() => {
    const sized = new ResizeObserver(([entry]) => {
      const { width, height } = entry.contentRect;
      view.value = { ...view.peek(), width, height };
    });
    sized.observe(box.current!);
    let lastGround = "";
    let lastPlaces: unknown;
    let wait: ReturnType<typeof setTimeout> | undefined;
    const stop = draws(() => {
      const [g, p, s] = [under.peek(), current.peek(), stage.peek()];
      if (!g || !(p || s) || view.peek().width === 0) {
        for (const c of [low.current, top.current]) c?.getContext("2d")?.clearRect(0, 0, c.width, c.height);
        lastGround = "";
        return;
      }
      const name = s?.key ?? `${chosen.peek()} ${g.map}`;
      const at = p ? g.frame.forward(p.mean as LonLat) : { e: 0, n: 0 };
      if (fitted.peek() !== name) {
        batch(() => {
          fitted.value = name;
          if (s) return fitStage(g, s);
          along.value = true;
          fit(g, at, p!.radii?.radius95M ?? 1000);
        });
      } else if (lookAt.peek()) {
        const go = lookAt.peek()!;
        batch(() => {
          lookAt.value = undefined;
          along.value = false;
          view.value = { ...view.peek(), ...g.frame.forward(go) };
        });
      } else if (!s && along.peek()) {
        const v = view.peek();
        // It moves on when the vehicle has left the middle third.
        if (Math.abs(at.e - v.e) > (v.width * v.mPerPx) / 6 || Math.abs(at.n - v.n) > (v.height * v.mPerPx) / 6) view.value = { ...v, e: at.e, n: at.n };
      }
      const v = view.peek();
      const key = `${JSON.stringify(v)}${dark.peek()}${g.fingerprint}${g.fine?.drawing.detailM}${JSON.stringify(g.fine?.box)}${placesHidden.peek()}`;
      if (key !== lastGround || places.peek() !== lastPlaces) {
        [lastGround, lastPlaces] = [key, places.peek()];
        drawGround(low.current!, v, g, dark.peek());
        writeNames(names, v, g, dark.peek());
        clearTimeout(wait);
        if (!s?.ground) wait = setTimeout(() => void refine(g.map, boxOf(v), v.mPerPx * 0.7), 200);
      }
      const began = performance.now();
      if (s) {
        const ctx = begin(top.current!, v);
        lay(ctx, names, v);
        s.paint(ctx, v, g, dark.peek());
      } else beginTop(top.current!, v, g, p!, belief(g), names);
      took.paint = performance.now() - began;
    });
    return () => {
      stop();
      sized.disconnect();
      clearTimeout(wait);
    };
  }, []);

  const keys = (e: KeyboardEvent) => {
    const steps: Record<string, [number, number]> = { ArrowLeft: [-60, 0], ArrowRight: [60, 0], ArrowUp: [0, -60], ArrowDown: [0, 60] };
    const v = view.peek();
    if (e.ctrlKey || e.metaKey || e.altKey) return;
    if (steps[e.key]) pan(...steps[e.key]);
    else if (e.key === "+" || e.key === "=") zoom(1 / 1.5);
    else if (e.key === "-") zoom(1.5);
    else if (e.key === "0" && under.peek()) fitMap(under.peek()!);
    else if (e.key === "v") along.value = true;
    else if (e.key === " " && under.peek()) point(under.peek()!.frame.inverse({ e: v.e, n: v.n }));
    else if (e.key === "Enter") close();
    else return;
    e.preventDefault();
  };

  const hand = useRef<{ from?: { x: number; y: number; moved: boolean }; fingers: Map<number, { x: number; y: number }> }>({ fingers: new Map() }).current;
  const down = (e: PointerEvent) => {
    hand.from = { x: e.clientX, y: e.clientY, moved: false };
    hand.fingers.set(e.pointerId, { x: e.clientX, y: e.clientY });
    (e.currentTarget as Element).setPointerCapture(e.pointerId);
  };
  const move = (e: PointerEvent) => {
    const { from, fingers } = hand;
    if (!from || e.buttons === 0) return;
    if (fingers.size > 1 && fingers.has(e.pointerId)) {
      // Two fingers: the scale goes with their distance.
      const [other] = [...fingers].filter(([id]) => id !== e.pointerId).map(([, p]) => p);
      const far = (p: { x: number; y: number }) => Math.max(Math.hypot(p.x - other.x, p.y - other.y), 10);
      const r = box.current!.getBoundingClientRect();
      zoom(far(fingers.get(e.pointerId)!) / far({ x: e.clientX, y: e.clientY }), (e.clientX + other.x) / 2 - r.left, (e.clientY + other.y) / 2 - r.top);
      fingers.set(e.pointerId, { x: e.clientX, y: e.clientY });
      hand.from = { x: e.clientX, y: e.clientY, moved: true };
      return;
    }
    const [dx, dy] = [e.clientX - from.x, e.clientY - from.y];
    if (!from.moved && Math.hypot(dx, dy) < 5) return;
    pan(-dx, -dy);
    hand.from = { x: e.clientX, y: e.clientY, moved: true };
  };
  const up = (e: PointerEvent) => {
    const g = under.peek();
    const { from, fingers } = hand;
    fingers.delete(e.pointerId);
    if (fingers.size > 0) {
      const [rest] = fingers.values();
      hand.from = { ...rest, moved: true }; // the finger that stays goes on from where it is
      return;
    }
    if (from && !from.moved && g) {
      const r = box.current!.getBoundingClientRect();
      point(g.frame.inverse(toEN(view.peek(), e.clientX - r.left, e.clientY - r.top)));
    }
    hand.from = undefined;
  };
  const lost = (e: PointerEvent) => {
    hand.fingers.delete(e.pointerId);
    hand.from = undefined;
  };

  useEffect(() => {
    const turned = (e: WheelEvent) => {
      const r = box.current!.getBoundingClientRect();
      zoom(Math.exp(e.deltaY / 500), e.clientX - r.left, e.clientY - r.top);
      e.preventDefault();
    };
    const b = box.current!;
    b.addEventListener("wheel", turned, { passive: false });
    return () => b.removeEventListener("wheel", turned);
  }, []);

  const [p, g] = [current.value, under.value];
  const s = stage.value;
  const trouble = groundTrouble.value[mapName.value ?? ""];
  const drawingIt = tool.value !== "none";
  return (
    <section class="map" aria-label="Map" onDragOver={(e) => e.preventDefault()} onDrop={(e) => (e.preventDefault(), void takePlaces(e.dataTransfer?.files[0]))}>
      <div
        ref={box}
        class={`ground ${drawingIt ? "pointing" : ""}`}
        tabIndex={0}
        role="application"
        aria-roledescription="map"
        aria-label={`Map of ${mapName.value || "no map"} with ${s ? s.label : `the belief of ${chosen.value || "no vehicle"}`}`}
        aria-describedby="map-keys"
        onKeyDown={keys}
        onPointerDown={down}
        onPointerMove={move}
        onPointerUp={up}
        onPointerCancel={lost}
        onDblClick={close}
      >
        <canvas ref={low} aria-hidden="true" />
        <canvas ref={top} aria-hidden="true" />
        {drawingIt && <span class="crosshair" aria-hidden="true" />}
      </div>
      <p id="map-keys" class="unseen">
        Arrow keys move the map, plus and minus change its scale, 0 shows all of it, v goes along with the vehicle. With a tool in hand, space points at the middle, and Enter closes an area.
      </p>
      {!g && <p class="cover">{s?.wait || trouble || (mapName.value ? `The map ${mapName.value} is on its way.` : "Choose a vehicle to see where it may be.")}</p>}
      {g && (
        <>
          <div class="buttons zoom">
            <button onClick={() => zoom(1 / 1.5)} aria-label="Larger scale" title="Larger scale (+)">+</button>
            <button onClick={() => zoom(1.5)} aria-label="Smaller scale" title="Smaller scale (−)">−</button>
          </div>
          <div class="buttons">
            <button onClick={() => fitMap(g)} title="Show the whole map (0)">Whole map</button>
            {p && <button
              aria-pressed={along.value}
              title="Go along with the vehicle (v)"
              onClick={() => {
                along.value = !along.value;
                if (along.value && p) fit(g, g.frame.forward(p.mean as LonLat), p.radii?.radius95M ?? 1000);
              }}
            >
              Go along
            </button>}
            <PlacesButton />
          </div>
          <Legend g={g} />
        </>
      )}
      {p && g && g.fingerprint !== p.mapFingerprint && <p class="note over">The vehicle uses another version of this map than the one that is drawn.</p>}
      {g && g.whole.drawing.leftOut > 0 && !g.fine && view.value.mPerPx > g.whole.drawing.detailM * 0.5 && (
        <p class="note under">{g.whole.drawing.leftOut} small roads are not drawn at this scale.</p>
      )}
    </section>
  );
}

/** A round length for a scale bar of at most so many pixels. */
function barOf(mPerPx: number, most: number): number {
  const unit = 10 ** Math.floor(Math.log10(mPerPx * most));
  return [5, 2, 1].map((k) => k * unit).find((m) => m <= mPerPx * most) ?? unit;
}

function Legend({ g }: { g: Ground }) {
  const b = stage.value ? undefined : latest.value?.belief;
  const bar = barOf(view.value.mPerPx, 110);
  const stops = (of: (t: number) => string) => `linear-gradient(to right, ${Array.from({ length: 9 }, (_, i) => of(i / 8)).join(",")})`;
  const scale = beliefScale(dark.value);
  const cell = b?.grid ? b.grid.cellM ** 2 : (b?.stretches[0]?.cellM ?? 1);
  const r = g.whole.drawing.relief;
  const p = current.value;
  const density = b ? b.peakMass / cell : 0;
  const per = b?.grid ? "m²" : "m of road";
  const share = (v: number) => `${figure(100 * v, 2)}\u00a0%`;
  return (
    <div class="legend">
      <div class="bar" style={{ width: `${bar / view.value.mPerPx}px` }}>
        {length(bar)}
      </div>
      {b && (
        <div>
          <div class="ramp" style={{ background: stops((t) => css(scale[Math.round(t * (scale.length - 1))])) }} />
          <div class="ends">
            <span>{share(density / 10 ** decades)}</span>
            <span>{share(density)}</span>
          </div>
          <div>probability per {per}</div>
          {leftOut(b) >= 0.001 && <div>{percent(leftOut(b))} too thin to be drawn</div>}
        </div>
      )}
      {r && (
        <div>
          <div class="ramp" style={{ background: stops((t) => css(groundColour(t, r.lowestM + t * (r.highestM - r.lowestM) < 0, dark.value))) }} />
          <div class="ends">
            <span>{figure(r.lowestM)} m</span>
            <span>{figure(r.highestM)} m</span>
          </div>
          <div>{r.highestM <= 0 ? "depth, as height" : "height"} of the ground</div>
        </div>
      )}
      {stage.value?.legend}
      {places.value && !placesHidden.value && <div><i class="sign own" /> places of {places.value.file}</div>}
      {p && (
        <ul>
          <li><i class="sign circle" /> 95 % circle{radiiHold(p) ? "" : ", if not lost"}</li>
          {p.status !== Status.LOCATED && p.modes.length > 1 && <li><i class="sign disc" /> places, likeliest first</li>}
          {past.value.some((q) => q.located) && <li><i class="sign track" /> track while located</li>}
          {fix.value && <li><i class="sign fix" /> satellite fix</li>}
          {onRoads(p) && p.offMap > 0.01 && <li>{percent(p.offMap)} off the map</li>}
        </ul>
      )}
    </div>
  );
}
