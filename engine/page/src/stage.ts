// What the map shows in place of the chosen vehicle, where a view has something
// of its own.
import { signal } from "@preact/signals";
import type { ComponentChildren } from "preact";
import type { Ground } from "./ground";
import type { View } from "./paint";
import type { LonLat } from "./project";

export type Stage = {
  /** The map is fitted to the points when this changes. */
  key: string;
  map: string;
  /** What to draw it on where that is no map of the server's. */
  ground?: Ground;
  /** What it is, for those who do not see it. */
  label: string;
  points: LonLat[];
  paint(ctx: CanvasRenderingContext2D, v: View, g: Ground, dark: boolean): void;
  legend?: ComponentChildren;
  /** What is said where there is no ground yet. */
  wait?: string;
};

export const stage = signal<Stage | undefined>(undefined);

/** A place that the map is to go to. */
export const lookAt = signal<LonLat | undefined>(undefined);
