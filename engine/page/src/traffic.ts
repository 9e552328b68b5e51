// Roads whose traffic is heard: what is known of the chosen one, as the server pushes it.
import { batch, effect, signal } from "@preact/signals";
import type { RoadShape, TrafficPicture } from "../../client/web/leadline/v1/traffic_pb.js";
import { followTraffic } from "./follow";
import { heardAt, roads } from "./live";

/** The road that is shown. */
export const road = signal("");

/** What was told of it last; the shape comes once, with the first picture. */
export type Heard = { drive: string; picture: TrafficPicture; shape: RoadShape; receivedAt: number };
export const heard = signal<Heard | undefined>(undefined);
/** Why there is no news; empty if there may be. */
export const trafficTrouble = signal("");

/** From which probability of existing on a vehicle is shown, and over how long flows are taken, s. */
export const leastExistence = signal(0.5);
export const flowS = signal(3600);

/** In how many parts of the road the intensity is asked for. */
export const parts = 200;

/** A tab that nobody sees holds no stream. */
const hidden = signal(document.hidden);
document.addEventListener("visibilitychange", () => (hidden.value = document.hidden));

/** Shows another road. */
export function chooseRoad(name: string) {
  if (name === road.peek()) return;
  batch(() => {
    road.value = name;
    heard.value = undefined;
    trafficTrouble.value = "";
  });
}

/** Follows the chosen road, or the first that comes, until the returned function is called. */
export function followRoad(): () => void {
  const name = road.value;
  const [least, flow] = [leastExistence.value, flowS.value];
  if (hidden.value) return () => {};
  let stop: (() => void) | undefined;
  let seen = ""; // a drive whose end is shown
  const open = () => {
    let shape: RoadShape | undefined;
    stop = followTraffic(
      { traffic: { road: name, leastExistence: least, flowS: flow, parts, shape: true }, minIntervalS: 0.2 },
      {
        link: (l) => (trafficTrouble.value = l.why),
        news: (m) => {
          if (name !== road.peek() || !m.picture) return;
          shape = m.shape ?? shape;
          heardAt.value = Date.now();
          if (shape) heard.value = { drive: m.drive, picture: m.picture, shape, receivedAt: Date.now() };
          if (m.picture.ended) seen = m.drive;
        },
      },
      () => {
        stop = undefined;
        // What came meanwhile is followed.
        const now = roads.peek().get(name);
        if (now && !now.ended && seen && now.drive !== seen) open();
      },
    );
  };
  // News of roads say when there is something to follow: nobody asks for it again and again.
  const off = effect(() => {
    const all = roads.value;
    if (!name) {
      const there = [...all].find(([, r]) => !r.ended) ?? [...all][0];
      if (there) queueMicrotask(() => !road.peek() && chooseRoad(there[0]));
      return;
    }
    const r = all.get(name);
    if (r && !stop && r.drive !== seen) open();
  });
  return () => {
    off();
    stop?.();
  };
}
