// Holds the floors of the house: imports point downward only, and the kernel imports nothing but itself.
import { readdirSync, readFileSync } from "node:fs";
import { dirname, join, normalize } from "node:path";

/** From the ground up. A file may import from its own room and from rooms listed before its floor. */
const floors = [
  ["assembly"],
  ["bindings"],
  ["src/errors.ts"],
  ["src/support"],
  ["src/matrix"],
  ["src/estimate"],
  ["src/model", "src/log"],
  ["src/decide"],
  ["src/index.ts", "src/cli", "src/gateway", "src/page", "src/demo"],
];
/** Rooms on one floor that may use each other: the surfaces show the demo, the models read the log. */
const sameFloor = new Set(["src/model", "src/log", "src/index.ts", "src/cli", "src/gateway", "src/page", "src/demo"]);

const inRoom = (file, room) => file === room || file.startsWith(`${room}/`);
const locate = (file) => {
  for (const [floor, rooms] of floors.entries()) for (const room of rooms) if (inRoom(file, room)) return { floor, room };
  return undefined;
};
const sources = (folder) =>
  readdirSync(folder, { withFileTypes: true }).flatMap((entry) => {
    const path = join(folder, entry.name);
    return entry.isDirectory() ? sources(path) : /(?<!\.d)\.[cm]?tsx?$/.test(entry.name) ? [path] : [];
  });

let broken = 0;
const complain = (file, what) => {
  console.error(`${file}: ${what}`);
  broken += 1;
};
for (const file of ["assembly", "bindings", "src"].flatMap(sources)) {
  const here = locate(file);
  if (!here) {
    complain(file, "stands on no floor: name its room in .tools/floors.mjs");
    continue;
  }
  for (const [, target] of readFileSync(file, "utf8").matchAll(/(?:\bfrom\s+|\bimport\s*\(?\s*)["'](\.[^"']*)["']/g)) {
    const path = normalize(join(dirname(file), target)).replace(/\.js$/, ".ts");
    const there = locate(path);
    if (!there) complain(file, `imports ${target}, which stands on no floor`);
    else if (there.room === here.room) continue;
    else if (here.floor === 0 || there.floor > here.floor) complain(file, `imports upward: ${target} (${there.room})`);
    else if (there.floor === here.floor && !(sameFloor.has(here.room) && sameFloor.has(there.room)))
      complain(file, `imports sideways: ${target} (${there.room})`);
    else if (there.floor === 0) complain(file, `imports the kernel's source ${target}: go through bindings`);
  }
}
if (broken) process.exit(1);
console.log("floors: imports point downward only");
