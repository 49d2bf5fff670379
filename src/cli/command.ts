#!/usr/bin/env node
// The command as it is installed: build/command.mjs, with the kernel in build/bindings.
import { run } from "./run.js";

process.exitCode = await run(process.argv.slice(2));
