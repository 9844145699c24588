/** Numbers as people and PLCs write them. */

const DECIMAL = /^[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?$/;

/** Whether a text is a decimal number, with a point and perhaps an exponent; nothing else stands in it. */
export const isDecimal = (text: string): boolean => DECIMAL.test(text);
