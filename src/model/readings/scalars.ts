import { wrapAngle } from "../quantities.js";
import { type ReadingForm, type ReadingKind, vectorForm } from "../reading-form.js";
import { type StateKindName, stateKinds } from "../states.js";

const oneNumber: readonly StateKindName[] = ["scalar", "clock-offset", "orientation", "height"];

/** One form for each kind of state with a single number, in that state's own unit. */
function forEachKind(roles: number, form: Pick<ReadingForm, "predict" | "jacobians">): ReadingForm[] {
  return oneNumber.map((kind) =>
    vectorForm({ ...form, states: Array.from({ length: roles }, () => [kind]), quantities: stateKinds[kind].quantities }),
  );
}

/** A direct reading of a state that is one number. */
export const scalar: ReadingKind = {
  roles: ["state"],
  forms: forEachKind(1, { predict: ([state]) => state!.value.slice(), jacobians: () => [Float64Array.of(1)] }),
};

/** The second state's number minus the first's; both of one kind. */
export const scalarDifference: ReadingKind = {
  roles: ["from", "to"],
  forms: forEachKind(2, {
    predict([from, to]) {
      const difference = to!.value[0]! - from!.value[0]!;
      return Float64Array.of(from!.kind.name === "orientation" ? wrapAngle(difference) : difference);
    },
    jacobians: () => [Float64Array.of(-1), Float64Array.of(1)],
  }),
};
