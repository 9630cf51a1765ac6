import { Fields } from './fields';

/** One line of an uncertainty budget; what is not known is null. */
export interface BudgetLine {
  name: string;
  standing: string;
  unit: string;
  distribution: string | null;
  half_width: number | null;
  standard_uncertainty: number | null;
  freedom: number | null;
  u_arcsec: number | null;
  share: number | null;
  note: string;
}

export interface AxisBudget {
  quantity: string;
  value_arcsec: number;
  combined_u_arcsec: number;
  expanded_u_arcsec: number;
  coverage_factor: number;
  level: number;
  effective_freedom: number | null;
  lines: BudgetLine[];
}

export function budgetOf(value: unknown): { x: AxisBudget; y: AxisBudget } {
  const fields = Fields.of(value, 'the uncertainty budget');
  return { x: axisOf(fields.object('x')), y: axisOf(fields.object('y')) };
}

function axisOf(fields: Fields): AxisBudget {
  return {
    quantity: fields.text('quantity'),
    value_arcsec: fields.number('value_arcsec'),
    combined_u_arcsec: fields.number('combined_u_arcsec'),
    expanded_u_arcsec: fields.number('expanded_u_arcsec'),
    coverage_factor: fields.number('coverage_factor'),
    level: fields.number('level'),
    effective_freedom: fields.numberOrNull('effective_freedom'),
    lines: fields.objects('lines').map((line) => ({
      name: line.text('name'),
      standing: line.text('standing'),
      unit: line.text('unit'),
      distribution: line.textOrNull('distribution'),
      half_width: line.numberOrNull('half_width'),
      standard_uncertainty: line.numberOrNull('standard_uncertainty'),
      freedom: line.numberOrNull('freedom'),
      u_arcsec: line.numberOrNull('u_arcsec'),
      share: line.numberOrNull('share'),
      note: line.text('note'),
    })),
  };
}

/** Both axes beside each other, line by line: the same lines in the same order. */
export function linesOf(
  both: { x: AxisBudget; y: AxisBudget },
): { name: string; x: BudgetLine | null; y: BudgetLine | null }[] {
  const names = [...new Set([...both.x.lines, ...both.y.lines].map((line) => line.name))];
  const find = (lines: BudgetLine[], name: string): BudgetLine | null =>
    lines.find((line) => line.name === name) ?? null;
  return names.map((name) => ({ name, x: find(both.x.lines, name), y: find(both.y.lines, name) }));
}
