// Kestermouth, an invented port: the ground plan that its demonstration logs share. Every name, place and figure is made up; instrument
// precisions are of the size that such instruments reach (common practice, no source).

export interface Place {
  readonly name: string;
  /** x east, y north, z up, in metres. */
  readonly at: readonly [number, number, number];
}

/** Lantern Quay runs from its west end along this azimuth, its water on the right hand. */
const westEnd = { x: 1000, y: 500 };
const azimuth = (82 * Math.PI) / 200;
const along = { x: Math.sin(azimuth), y: Math.cos(azimuth) };
/** Horizontal unit vector out over the water. */
export const seaward: { readonly x: number; readonly y: number } = { x: along.y, y: -along.x };

/** A place by its distance along the quay from the west end, its distance back from the quay's face, and its height. */
function quayPlace(distance: number, back: number, height: number): [number, number, number] {
  return [westEnd.x + distance * along.x - back * seaward.x, westEnd.y + distance * along.y - back * seaward.y, height];
}

const bays = 30;
const bayLength = 24;

export interface Mark extends Place {
  readonly bay: number;
  /** Metres from the west end. */
  readonly distance: number;
}

/** What each bay carries: its bollard (mark 0) and seven more, by offset along the bay, distance back from the face, height. */
const bayMarks: readonly (readonly [number, number, number])[] = [
  [12, 0.6, 4.9], // bollard
  [2, 0.2, 4.5], // cope
  [12, 0.2, 4.5],
  [21, 0.2, 4.5],
  [4, 0, 2.6], // face of the wall, above high water
  [19, 0, 2.6],
  [6, 5.5, 4.4], // crane rail
  [18, 5.5, 4.4],
];

/** The 240 marks on the quay wall, "B01.0" to "B30.7"; B11.0 is the bollard of bay 11. */
export const marks: readonly Mark[] = Array.from({ length: bays }, (_, k) => k + 1).flatMap((bay) =>
  bayMarks.map(([offset, back, height], index): Mark => {
    const distance = (bay - 1) * bayLength + offset;
    return { name: `B${String(bay).padStart(2, "0")}.${index}`, bay, distance, at: quayPlace(distance, back, height) };
  }),
);

/** Instrument pillars on the yard behind the quay. */
export const stations: readonly Place[] = Array.from({ length: 8 }, (_, k) => ({
  name: `S${k + 1}`,
  at: quayPlace(45 + 90 * k, 38 + 9 * (k % 2), 6.2 + 0.4 * (k % 3)),
}));

/** Reference marks on firm ground, known before the monitoring began. */
export const references: readonly Place[] = [
  { name: "Tollhouse", at: quayPlace(-80, 60, 9.5) },
  { name: "Gorse Hill", at: quayPlace(150, 210, 24) },
  { name: "Ropewalk", at: quayPlace(360, 150, 8.8) },
  { name: "Net Loft", at: quayPlace(560, 190, 12.6) },
  { name: "Mole Root", at: quayPlace(800, 70, 7.4) },
  { name: "Seamark", at: quayPlace(380, -160, 11) },
];

/** Metres between two places in plan. */
export const planDistance = (a: Place["at"], b: Place["at"]): number => Math.hypot(a[0] - b[0], a[1] - b[1]);
