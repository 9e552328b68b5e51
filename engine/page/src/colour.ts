// Colours that are drawn, not styled. Scales rise evenly in lightness, so that they
// read the same without hue.

export type RGB = [number, number, number];

/** Oklch (Ottosson 2020) to sRGB, cut off where the screen has no such colour. */
export function oklch(l: number, c: number, hueDeg: number): RGB {
  const [a, b] = [c * Math.cos((hueDeg * Math.PI) / 180), c * Math.sin((hueDeg * Math.PI) / 180)];
  const [x, y, z] = [
    (l + 0.3963377774 * a + 0.2158037573 * b) ** 3,
    (l - 0.1055613458 * a - 0.0638541728 * b) ** 3,
    (l - 0.0894841775 * a - 1.291485548 * b) ** 3,
  ];
  const linear = [
    4.0767416621 * x - 3.3077115913 * y + 0.2309699292 * z,
    -1.2684380046 * x + 2.6097574011 * y - 0.3413193965 * z,
    -0.0041960863 * x - 0.7034186147 * y + 1.707614701 * z,
  ];
  return linear.map((v) => {
    const u = Math.min(1, Math.max(0, v));
    return Math.round(255 * (u <= 0.0031308 ? 12.92 * u : 1.055 * u ** (1 / 2.4) - 0.055));
  }) as RGB;
}

export const css = ([r, g, b]: RGB, alpha = 1) => (alpha === 1 ? `rgb(${r},${g},${b})` : `rgba(${r},${g},${b},${alpha})`);

/** How many colours a belief is drawn with. */
export const bins = 32;

/** How many powers of ten of density those span. */
export const decades = 4;

/** The colours of a belief, from its thinnest to its densest part. */
export function beliefScale(dark: boolean): RGB[] {
  return Array.from({ length: bins }, (_, i) => {
    const t = i / (bins - 1);
    return dark ? oklch(0.42 + 0.53 * t, 0.13, 330 + 130 * t) : oklch(0.86 - 0.56 * t, 0.08 + 0.1 * t, 75 - 100 * t);
  });
}

/** The bin of a byte of a belief, -1 if it is thinner than the scale; see belief.proto. */
export function binOf(byte: number): number {
  const t = 1 + (byte - 255) / 16 / (decades * Math.LN10);
  return byte === 0 || t < 0 ? -1 : Math.min(bins - 1, Math.floor(t * bins));
}

/** The ground's colour at a height, t from 0 at the lowest to 1. */
export function ground(t: number, below: boolean, dark: boolean): RGB {
  if (dark) return below ? oklch(0.2 + 0.16 * t, 0.035, 245) : oklch(0.24 + 0.14 * t, 0.03, 140 - 60 * t);
  return below ? oklch(0.8 + 0.14 * t, 0.028 - 0.01 * t, 235) : oklch(0.93 + 0.04 * t, 0.025, 140 - 60 * t);
}

/** What is drawn on the map beside belief and ground. */
export const ink = (dark: boolean) =>
  dark
    ? { paper: "#15191d", road: "#56606a", casing: "#0c0f12", tunnel: "#3f4850", name: "#c3ccd4", halo: "#15191d", track: "#8fb4ff", mark: "#ffffff", fix: "#5fd38d", area: "#ffd24a", place: "#d9c9a3" }
    : { paper: "#f6f4ef", road: "#ffffff", casing: "#a29f96", tunnel: "#d8d4ca", name: "#33373b", halo: "#f6f4ef", track: "#2456c9", mark: "#101418", fix: "#0a6b3a", area: "#8a5a00", place: "#5a4a12" };
