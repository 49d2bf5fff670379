// What the tests use of packages that carry no types.
declare module "topojson-client" {
  /** For each object, the indices of those that share an arc with it. */
  export function neighbors(objects: readonly object[]): number[][];
}
declare module "us-atlas/counties-10m.json" {
  const atlas: { objects: { counties: { geometries: { type: string; id: string }[] } } };
  export default atlas;
}
