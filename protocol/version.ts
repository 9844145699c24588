/** Number of the bundle document's format; a reader refuses any other. */
export const BUNDLE_FORMAT = 1;
/** Number of the segment format; every number that ever shipped stays readable. */
export const SEGMENT_FORMAT = 1;
/** The format of segments made without a bundle, in which readings off the lattice may stand as they came. */
export const PLAIN_SEGMENT_FORMAT = 2;
/** The format of segments in which a channel is coarser than its sensor, to save bytes. */
export const COARSE_SEGMENT_FORMAT = 3;
/** Number of the filter's arithmetic: the fixed order of + - × ÷ √ that makes two machines agree to the bit. */
export const ARITHMETIC = 1;
/** Number carried by every JSON message as `format`. */
export const MESSAGE_FORMAT = 1 as const;
/** The mark that every published message carries. */
export const ADVISORY =
  'Advisory estimate. Not a safety function; no SIL claimed. Do not use as the only basis for action, ' +
  'and do not connect to interlocks or trips. Absence of a warning is not evidence of safety.';
