// What the person points at on the map: a place with a radius, an area, or a route.
import { batch, signal } from "@preact/signals";
import type { LonLat } from "./project";

export const tool = signal<"none" | "place" | "area" | "route">("none");
export const spot = signal<LonLat | undefined>(undefined);
/** The name of what is asked about, if it has one. */
export const asksFor = signal("");
export const spotRadiusM = signal(25);
export const corners = signal<LonLat[]>([]);
/** The corners of a route that is planned. */
export const way = signal<LonLat[]>([]);
export const closed = signal(false);

/** Points at a place with the tool in hand. */
export function point(p: LonLat) {
  asksFor.value = "";
  if (tool.value === "place") {
    forgetArea();
    spot.value = p;
  } else if (tool.value === "route") {
    if (way.value.length < 200) way.value = [...way.value, p];
  } else if (tool.value === "area") {
    if (closed.value) forgetArea();
    spot.value = undefined;
    if (corners.value.length < 200) corners.value = [...corners.value, p];
  }
}

export function forgetArea() {
  batch(() => {
    corners.value = [];
    closed.value = false;
  });
}

/** Ends the outline of an area, if it is one. */
export function close() {
  if (tool.value === "area" && corners.value.length >= 3) closed.value = true;
}
