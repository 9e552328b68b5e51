// Roads whose traffic is heard: which there are, and what is known of the chosen one,
// as the server pushes it.
import { batch, signal } from "@preact/signals";
import type { Vehicle } from "../../client/web/leadline/v1/fleet_pb.js";
import type { RoadShape, TrafficPicture } from "../../client/web/leadline/v1/traffic_pb.js";
import { calls, sentence, soon } from "./api";
import { followTraffic } from "./follow";
import { needsRole } from "./identity";
import { heardAt } from "./live";

/** The road that is shown. */
export const road = signal("");

/** The roads that the server has; undefined before it has said so. */
export const roads = signal<Vehicle[] | undefined>(undefined);
export const roadsTrouble = signal("");

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

const mostRoads = 1000;
const again = 4000; // ms

/** Shows another road. */
export function chooseRoad(name: string) {
  if (name === road.peek()) return;
  batch(() => {
    road.value = name;
    heard.value = undefined;
    trafficTrouble.value = "";
  });
}

/** Asks which roads there are; shows the first if none is chosen. */
export async function listRoads() {
  try {
    const { vehicles } = await calls.listVehicles({ pageSize: mostRoads, traffic: true }, soon);
    batch(() => {
      roads.value = vehicles;
      roadsTrouble.value = "";
      const there = vehicles.find((v) => !v.ended) ?? vehicles[0];
      if (!road.peek() && there) chooseRoad(there.vehicle);
    });
  } catch (e) {
    roadsTrouble.value = needsRole(e, "Listing roads", "dispatcher", "analyst", "administrator") ?? sentence(e);
  }
}

/** Follows the chosen road until the returned function is called. */
export function followRoad(): () => void {
  const name = road.value;
  const [least, flow] = [leastExistence.value, flowS.value];
  if (hidden.value) return () => {};
  if (!name) {
    // There is none yet: one may come.
    const timer = setInterval(() => void listRoads(), again);
    return () => clearInterval(timer);
  }
  let stop = () => {};
  let timer: ReturnType<typeof setTimeout> | undefined;
  const over = () => {
    stop();
    clearTimeout(timer);
  };
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
          if (m.picture.ended) awaitNext(m.drive);
        },
      },
    );
  };
  /** Another drive may come after one that has ended. */
  const awaitNext = (drive: string) => {
    timer = setTimeout(async () => {
      await listRoads();
      const now = roads.peek()?.find((v) => v.vehicle === name);
      if (now && !now.ended && now.drive !== drive) open();
      else if (road.peek() === name) awaitNext(drive);
    }, again);
  };
  open();
  return over;
}
