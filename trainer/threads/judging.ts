/** What the second thread can judge; loaded there when asked for, since it is much. */
import { modelFromBundle } from '@stillwell/runtime/filter';
import { reliance } from '../judge/reliance.ts';
import { settle } from '../judge/settle.ts';
import { auditRounding } from '../quantise/audit.ts';
import type { Requests } from './requests.ts';

/** Answers 'settle'. */
export function settled({ model, series, span, wanted }: Requests['settle']['given']): Requests['settle']['got'] {
  return settle(model, series, span, wanted);
}

/** Answers 'check'. */
export function checked({ bundle, float, series, judged }: Requests['check']['given']): Requests['check']['got'] {
  const model = modelFromBundle(bundle);
  return { audit: auditRounding(model, float, series, judged, null), reliance: reliance(model, series, judged) };
}
