// The view and the vehicle, as the page's address has them.
import { signal } from "@preact/signals";
import { choose, chosen } from "./live";
import { tool } from "./pointing";
import { chooseRoad, road } from "./traffic";

export const views = [
  ["now", "Now"],
  ["chances", "Chances"],
  ["ahead", "Ahead"],
  ["traffic", "Traffic"],
  ["past", "Past runs"],
  ["alarms", "Alarms"],
  ["maps", "At the server"],
] as const;
export type ViewName = (typeof views)[number][0];

export const shown = signal<ViewName>("now");

function read() {
  const [name, vehicle] = location.hash.slice(1).split("/");
  shown.value = views.find(([v]) => v === name)?.[0] ?? "now";
  if (vehicle) {
    try {
      (shown.value === "traffic" ? chooseRoad : choose)(decodeURIComponent(vehicle));
    } catch {
      // Nothing is called that.
    }
  }
  if (shown.value !== "chances") tool.value = "none";
}

/** The address of a view of a vehicle, or of a road's traffic: the chosen one if none is named. */
export const address = (v: ViewName, name = v === "traffic" ? road.value : chosen.value) => `#${v}${name ? "/" + encodeURIComponent(name) : ""}`;

/** Goes by the address from now on. */
export function route() {
  read();
  addEventListener("hashchange", read);
}
