// Transverse Mercator on WGS 84, as maps' frames and UTM have it: Krüger's series
// to sixth order, as given by Karney, J. Geodesy 85 (2011).

export type EN = { e: number; n: number };
export type LonLat = { lon: number; lat: number };

const a = 6378137;
const f = 1 / 298.257223563;
const n = f / (2 - f);
const ecc = Math.sqrt(f * (2 - f));
const [n2, n3, n4, n5, n6] = [n ** 2, n ** 3, n ** 4, n ** 5, n ** 6];
const rectifying = (a / (1 + n)) * (1 + n2 / 4 + n4 / 64 + n6 / 256);
const alpha = [
  n / 2 - (2 * n2) / 3 + (5 * n3) / 16 + (41 * n4) / 180 - (127 * n5) / 288 + (7891 * n6) / 37800,
  (13 * n2) / 48 - (3 * n3) / 5 + (557 * n4) / 1440 + (281 * n5) / 630 - (1983433 * n6) / 1935360,
  (61 * n3) / 240 - (103 * n4) / 140 + (15061 * n5) / 26880 + (167603 * n6) / 181440,
  (49561 * n4) / 161280 - (179 * n5) / 168 + (6601661 * n6) / 7257600,
  (34729 * n5) / 80640 - (3418889 * n6) / 1995840,
  (212378941 * n6) / 319334400,
];
const beta = [
  n / 2 - (2 * n2) / 3 + (37 * n3) / 96 - n4 / 360 - (81 * n5) / 512 + (96199 * n6) / 604800,
  n2 / 48 + n3 / 15 - (437 * n4) / 1440 + (46 * n5) / 105 - (1118711 * n6) / 3870720,
  (17 * n3) / 480 - (37 * n4) / 840 - (209 * n5) / 4480 + (5569 * n6) / 90720,
  (4397 * n4) / 161280 - (11 * n5) / 504 - (830251 * n6) / 7257600,
  (4583 * n5) / 161280 - (108847 * n6) / 3991680,
  (20648693 * n6) / 638668800,
];
const rad = Math.PI / 180;

/** The tangent of the conformal latitude. */
function conformal(tau: number): number {
  const s = Math.sinh(ecc * Math.atanh((ecc * tau) / Math.hypot(1, tau)));
  return tau * Math.hypot(1, s) - s * Math.hypot(1, tau);
}

function raw(lon: number, lat: number): { x: number; y: number } {
  const t = conformal(Math.tan(lat * rad));
  const l = lon * rad;
  const xi0 = Math.atan2(t, Math.cos(l));
  const eta0 = Math.asinh(Math.sin(l) / Math.hypot(t, Math.cos(l)));
  let xi = xi0;
  let eta = eta0;
  for (let j = 1; j <= 6; j++) {
    xi += alpha[j - 1] * Math.sin(2 * j * xi0) * Math.cosh(2 * j * eta0);
    eta += alpha[j - 1] * Math.cos(2 * j * xi0) * Math.sinh(2 * j * eta0);
  }
  return { x: rectifying * eta, y: rectifying * xi };
}

/** A map's metric frame. */
export class Frame {
  private readonly y0: number;
  constructor(
    readonly origin: LonLat,
    private readonly scale = 1,
    private readonly falseE = 0,
    private readonly falseN = 0,
  ) {
    this.y0 = raw(0, origin.lat).y;
  }

  forward(p: LonLat): EN {
    const { x, y } = raw(p.lon - this.origin.lon, p.lat);
    return { e: this.falseE + this.scale * x, n: this.falseN + this.scale * (y - this.y0) };
  }

  inverse(p: EN): LonLat {
    const xi = ((p.n - this.falseN) / this.scale + this.y0) / rectifying;
    const eta = (p.e - this.falseE) / this.scale / rectifying;
    let xi0 = xi;
    let eta0 = eta;
    for (let j = 1; j <= 6; j++) {
      xi0 -= beta[j - 1] * Math.sin(2 * j * xi) * Math.cosh(2 * j * eta);
      eta0 -= beta[j - 1] * Math.cos(2 * j * xi) * Math.sinh(2 * j * eta);
    }
    const target = Math.sin(xi0) / Math.hypot(Math.sinh(eta0), Math.cos(xi0));
    let tau = target;
    for (let i = 0; i < 5; i++) {
      const c = conformal(tau);
      tau += (((target - c) / Math.hypot(1, c)) * (1 + (1 - ecc * ecc) * tau * tau)) / ((1 - ecc * ecc) * Math.hypot(1, tau));
    }
    return { lon: this.origin.lon + Math.atan2(Math.sinh(eta0), Math.cos(xi0)) / rad, lat: Math.atan(tau) / rad };
  }
}

/** The zone of the Universal Transverse Mercator grid; undefined near the poles, where it has none. */
export function utm(p: LonLat): { zone: number; band: string; e: number; n: number } | undefined {
  if (p.lat < -80 || p.lat > 84) return undefined;
  let zone = (Math.floor((p.lon + 180) / 6) % 60) + 1;
  if (p.lat >= 56 && p.lat < 64 && p.lon >= 3 && p.lon < 12) zone = 32; // Norway
  if (p.lat >= 72) {
    // Svalbard
    if (p.lon >= 0 && p.lon < 9) zone = 31;
    else if (p.lon >= 9 && p.lon < 21) zone = 33;
    else if (p.lon >= 21 && p.lon < 33) zone = 35;
    else if (p.lon >= 33 && p.lon < 42) zone = 37;
  }
  const at = new Frame({ lon: 6 * zone - 183, lat: 0 }, 0.9996, 500_000, p.lat < 0 ? 10_000_000 : 0).forward(p);
  return { zone, band: "CDEFGHJKLMNPQRSTUVWX"[Math.min(19, Math.floor((p.lat + 80) / 8))], e: at.e, n: at.n };
}
