/** How the two networks were trained. */
import type { LearningStep, Pictures, Summary } from "./artifacts.js";
import { figure, figures, legend, lineSwatch } from "./figure.js";
import { number, quantity } from "./format.js";
import { type Markup, markup } from "./markup.js";
import { FIRST, LIMIT, LINE, MUTED, SECOND } from "./theme.js";
import { axisTitle, type ChartSpec, type HistoryScale, historyScale, vegaChart } from "./vegaChart.js";

export async function trainingHistory(summary: Summary, pictures: Pictures): Promise<Markup> {
  const { residualHistory, learning } = pictures;
  const drawn = [
    ...(residualHistory.length === 0 ? [] : [residualLoss(residualHistory)]),
    ...(learning.length === 0 ? [] : learningFigures(summary, learning)),
  ];
  const missing = [
    ...(residualHistory.length === 0 ? ["the residual"] : []),
    ...(learning.length === 0 ? ["the metric"] : []),
  ];
  return markup`${missing.length === 0 ? null : markup`<p class="note">No training history of ${missing.join(" and ")} was saved.</p>`}${figures(await Promise.all(drawn))}`;
}

async function residualLoss(history: Pictures["residualHistory"]): Promise<Markup> {
  const values = history.flatMap(({ train, validation }) => [train, validation]).filter(Number.isFinite);
  const y = { type: "quantitative", title: "loss (1)", scale: historyScale(values) };
  const x = { field: "step", type: "quantitative", title: "training step", scale: { nice: false } };
  const last = history.at(-1)!;
  const picture = await vegaChart(
    {
      data: { values: history },
      layer: [
        { mark: { type: "line", color: FIRST, strokeWidth: 2 }, encoding: { x, y: { ...y, field: "train" } } },
        {
          mark: { type: "line", color: SECOND, strokeWidth: 2, strokeDash: [7, 3] },
          encoding: { x, y: { ...y, field: "validation" } },
        },
      ],
    },
    {
      key: "residual-loss",
      label: `Loss of the residual fit over ${last.step} steps; at the end ${number(last.train)} on the fit runs, ${number(last.validation)} on the validation runs.`,
    },
  );
  return figure({
    title: "Fit of the residual",
    picture,
    legend: legend([
      { swatch: lineSwatch(FIRST, []), text: "fit runs" },
      { swatch: lineSwatch(SECOND, [7, 3]), text: "validation runs" },
    ]),
    shows:
      "The loss over windows while the missing dynamics are fitted; the kept weights are those that do best on the validation runs.",
    showsNot: "The error on the held-out runs; that is in the bars above.",
  });
}

function learningFigures(summary: Summary, learning: readonly LearningStep[]): Promise<Markup>[] {
  const { goal } = summary;
  const last = learning.at(-1)!;
  const margins = learning.map(({ margin }) => margin).filter(Number.isFinite);
  const rounds = roundStarts(learning);
  const roundKey =
    rounds.length === 0
      ? []
      : [
          {
            swatch: markup`<path d="M17 0V14" stroke="${MUTED}" stroke-width="1.5"/>`,
            text: "a new round with the verifier's worst states",
          },
        ];
  const shortfall = async (): Promise<Markup> =>
    figure({
      title: "Training of the metric: how far it is short",
      picture: await vegaChart(
        lineSpec(learning, rounds, "shortfall", "shortfall of the rate (1/s)", FIRST, { type: "linear", zero: false }, [
          {
            data: { values: [{ shortfall: 0 }] },
            mark: { type: "rule", color: LIMIT, strokeDash: [6, 3] },
            encoding: { y: { field: "shortfall", type: "quantitative" } },
          },
        ]),
        {
          key: "shortfall",
          label: `Shortfall of the worst state of a batch over ${last.step} steps; at the end ${quantity(last.shortfall, "1/s", "up")}.`,
        },
      ),
      legend: legend([
        { swatch: lineSwatch(FIRST, []), text: "worst state of the batch" },
        { swatch: lineSwatch(LIMIT, [6, 3]), text: "at or below: the batch holds" },
        ...roundKey,
      ]),
      shows: "How far the worst state of each batch is short of the rate within the authority limit.",
      showsNot: "Whether the metric holds: the verifier decides that, with its own code.",
    });
  const margin = async (): Promise<Markup> =>
    figure({
      title: `Training of the metric: margin '${goal.name}'`,
      picture: await vegaChart(
        lineSpec(
          learning,
          rounds,
          "margin",
          axisTitle(`margin '${goal.name}' of the batch`, goal.unit),
          FIRST,
          historyScale(margins),
          [],
        ),
        {
          key: "training-margin",
          label: `Asked margin over the training batches; at the end ${quantity(last.margin, goal.unit, "up")} at a rate of ${quantity(last.rate, "1/s")}.`,
        },
      ),
      legend: legend([{ swatch: lineSwatch(FIRST, []), text: "margin over the batch" }, ...roundKey]),
      shows: "The quantity that the training makes small.",
      showsNot: "The margin to use: that is the verified one at the top.",
    });
  return [shortfall(), margin()];
}

function lineSpec(
  learning: readonly LearningStep[],
  rounds: readonly { readonly step: number }[],
  field: "shortfall" | "margin",
  title: string,
  color: string,
  scale: HistoryScale,
  under: readonly ChartSpec[],
): ChartSpec {
  const x = { field: "step", type: "quantitative", title: "training step", scale: { nice: false } };
  return {
    layer: [
      { data: { values: rounds }, mark: { type: "rule", color: LINE, strokeWidth: 1.5 }, encoding: { x } },
      ...under,
      {
        data: { values: learning.filter((step) => Number.isFinite(step[field])) },
        mark: { type: "line", color, strokeWidth: 2 },
        encoding: { x, y: { field, type: "quantitative", title, scale } },
      },
    ],
  };
}

/** First step of every round but the first. */
function roundStarts(learning: readonly LearningStep[]): { step: number }[] {
  return learning.filter(({ round }, i) => i > 0 && round !== learning[i - 1]!.round).map(({ step }) => ({ step }));
}
