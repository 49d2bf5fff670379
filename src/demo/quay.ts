// An invented survey network on the quay of the invented port of Kestermouth: what was measured between which points, how precisely.
// All names, places and figures are made up; the precisions are of the size that such instruments reach (common practice, no source).

/** A difference of coordinates between two points, with the standard deviations of east, north and height in millimetres. */
export interface CoordinateDifference {
  from: string;
  to: string;
  east: number;
  north: number;
  height: number;
}

/** A levelled height difference, with its standard deviation in millimetres. */
export interface HeightDifference {
  from: string;
  to: string;
  height: number;
}

/** Pillars on firm ground: held fixed. */
export const pillars: readonly string[] = ["Gorse Hill", "Tollhouse"];

export const points: readonly string[] = [
  "Root stone",
  "Bollard 1",
  "Bollard 2",
  "Bollard 3",
  "Bollard 4",
  "Crane rail west",
  "Crane rail mid",
  "Crane rail east",
  "Pump house",
  "Slipway",
  "Mole foot",
  "Mole head",
];

const difference = (from: string, to: string, east: number, north: number, height: number): CoordinateDifference => ({
  from,
  to,
  east,
  north,
  height,
});

export const coordinateDifferences: readonly CoordinateDifference[] = [
  // Satellite baselines from the pillars.
  difference("Gorse Hill", "Root stone", 3.2, 3.2, 6.5),
  difference("Gorse Hill", "Crane rail mid", 3.5, 3.5, 7.0),
  difference("Tollhouse", "Root stone", 3.1, 3.1, 6.2),
  difference("Tollhouse", "Pump house", 3.3, 3.3, 6.6),
  difference("Tollhouse", "Mole foot", 3.8, 3.8, 7.6),
  // Tachymeter legs along the quay: better across the line of sight than along it.
  difference("Root stone", "Bollard 1", 0.9, 1.2, 2.0),
  difference("Bollard 1", "Bollard 2", 0.9, 1.2, 2.0),
  difference("Bollard 2", "Bollard 3", 0.9, 1.2, 2.0),
  difference("Bollard 3", "Bollard 4", 0.9, 1.2, 2.0),
  difference("Root stone", "Crane rail west", 1.1, 1.1, 2.2),
  difference("Crane rail west", "Crane rail mid", 1.0, 1.3, 2.2),
  difference("Crane rail mid", "Crane rail east", 1.0, 1.3, 2.2),
  difference("Crane rail east", "Bollard 4", 1.1, 1.1, 2.2),
  difference("Bollard 2", "Crane rail west", 1.2, 1.0, 2.1),
  difference("Bollard 3", "Pump house", 1.4, 1.2, 2.4),
  difference("Crane rail east", "Slipway", 1.6, 1.4, 2.8),
  difference("Slipway", "Mole foot", 1.6, 1.8, 3.0),
  difference("Mole foot", "Mole head", 2.4, 2.0, 3.8),
];

export const heightDifferences: readonly HeightDifference[] = [
  { from: "Gorse Hill", to: "Root stone", height: 1.4 },
  { from: "Root stone", to: "Bollard 1", height: 0.4 },
  { from: "Bollard 1", to: "Bollard 2", height: 0.4 },
  { from: "Bollard 2", to: "Bollard 3", height: 0.4 },
  { from: "Bollard 3", to: "Bollard 4", height: 0.4 },
  { from: "Bollard 4", to: "Crane rail east", height: 0.5 },
  { from: "Crane rail east", to: "Crane rail mid", height: 0.5 },
  { from: "Crane rail mid", to: "Crane rail west", height: 0.5 },
  { from: "Crane rail west", to: "Root stone", height: 0.5 },
  { from: "Pump house", to: "Tollhouse", height: 1.2 },
  { from: "Bollard 3", to: "Pump house", height: 0.7 },
  { from: "Slipway", to: "Crane rail east", height: 0.9 },
];
