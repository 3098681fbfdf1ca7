/**
 * Derivatives of the operations that the learning stages use. The Node build of tfjs-core holds the operations but not
 * their derivatives, so wasm and plain JavaScript get them from here (reverse mode: Griewank and Walther, "Evaluating
 * Derivatives", 2nd ed., 2008, section 3.2): from dy, the gradient of the scalar in an operation's result, to the
 * gradients in its arguments. An operation that is missing here throws when it is differentiated; add it with its test.
 */
import type * as Tf from "@tensorflow/tfjs-core";

type Rule = Pick<Tf.GradConfig, "inputsToSave" | "outputsToSave" | "saveAllInputs"> & {
  readonly gradient: (
    dy: Tf.Tensor,
    saved: Tf.Tensor[],
    attributes: Tf.NamedAttrMap,
  ) => Record<string, () => Tf.Tensor>;
};

/** Names of the operations that can be differentiated after `registerGradients`. */
export const DIFFERENTIABLE = [
  ...["Abs", "Add", "BatchMatMul", "Cast", "Concat", "Identity", "Minimum", "Multiply", "RealDiv", "Reshape"],
  ...["Square", "Sub", "Sum", "Tanh"],
] as const;

/** Into the library's own table; a derivative that is there already is replaced, so that one engine has one arithmetic. */
export function registerGradients(tf: typeof Tf): void {
  for (const [kernelName, { gradient, ...saved }] of Object.entries(rules(tf))) {
    tf.registerGradient({
      kernelName,
      ...saved,
      gradFunc: (dy, tensors, attributes) => gradient(dy as Tf.Tensor, tensors, attributes) as ReturnType<Tf.GradFunc>,
    });
  }
}

function rules(tf: typeof Tf): Record<(typeof DIFFERENTIABLE)[number], Rule> {
  /** Sum over the axes along which an argument of this shape was repeated. */
  const reduced = (gradient: Tf.Tensor, shape: readonly number[]): Tf.Tensor => {
    const axes = tf.broadcast_util.getReductionAxes([...shape], gradient.shape);
    return tf.reshape(axes.length > 0 ? tf.sum(gradient, axes) : gradient, [...shape]);
  };
  const both = (
    ofA: (dy: Tf.Tensor, a: Tf.Tensor, b: Tf.Tensor) => Tf.Tensor,
    ofB: (dy: Tf.Tensor, a: Tf.Tensor, b: Tf.Tensor) => Tf.Tensor,
  ): Rule => ({
    inputsToSave: ["a", "b"],
    gradient: (dy, [a, b]) => ({
      a: () => reduced(ofA(dy, a!, b!), a!.shape),
      b: () => reduced(ofB(dy, a!, b!), b!.shape),
    }),
  });
  const ofInput = (gradient: (dy: Tf.Tensor, x: Tf.Tensor) => Tf.Tensor): Rule => ({
    inputsToSave: ["x"],
    gradient: (dy, [x]) => ({ x: () => gradient(dy, x!) }),
  });
  const passed: Rule = { gradient: (dy) => ({ x: () => tf.cast(dy, "float32") }) };
  return {
    Abs: ofInput((dy, x) => tf.mul(dy, tf.sign(x))),
    Add: both(
      (dy) => dy,
      (dy) => dy,
    ),
    BatchMatMul: {
      inputsToSave: ["a", "b"],
      gradient: (dy, [a, b], { transposeA, transposeB }) => ({
        a: () => (transposeA ? tf.matMul(b!, dy, Boolean(transposeB), true) : tf.matMul(dy, b!, false, !transposeB)),
        b: () => (transposeB ? tf.matMul(dy, a!, true, Boolean(transposeA)) : tf.matMul(a!, dy, !transposeA, false)),
      }),
    },
    Cast: passed,
    Concat: {
      saveAllInputs: true,
      gradient: (dy, saved, { axis }) => {
        const [along] = tf.util.parseAxisParam(axis as number, saved[0]!.shape);
        const parts = tf.split(
          dy,
          saved.map(({ shape }) => shape[along!]!),
          along,
        );
        return Object.fromEntries(parts.map((part, i) => [i, () => part]));
      },
    },
    Identity: passed,
    Minimum: both(
      (dy, a, b) => tf.mul(dy, tf.cast(tf.lessEqual(a, b), "float32")),
      (dy, a, b) => tf.mul(dy, tf.cast(tf.greater(a, b), "float32")),
    ),
    Multiply: both(
      (dy, _, b) => tf.mul(dy, b),
      (dy, a) => tf.mul(dy, a),
    ),
    RealDiv: both(
      (dy, _, b) => tf.div(dy, b),
      (dy, a, b) => tf.neg(tf.div(tf.mul(dy, a), tf.square(b))),
    ),
    Reshape: ofInput((dy, x) => tf.reshape(dy, x.shape)),
    Square: ofInput((dy, x) => tf.mul(dy, tf.mul(2, x))),
    Sub: both(
      (dy) => dy,
      (dy) => tf.neg(dy),
    ),
    Sum: {
      inputsToSave: ["x"],
      gradient: (dy, [x], { axis }) => {
        const axes = tf.util.parseAxisParam(axis as number | number[], x!.shape);
        const kept = x!.shape.map((size, i) => (axes.includes(i) ? 1 : size));
        return { x: () => tf.mul(tf.reshape(dy, kept), tf.ones(x!.shape)) };
      },
    },
    Tanh: { outputsToSave: [true], gradient: (dy, [y]) => ({ x: () => tf.mul(dy, tf.sub(1, tf.square(y!))) }) },
  };
}
