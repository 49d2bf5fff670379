export { default, initSync } from "../bindings/loader.js";
