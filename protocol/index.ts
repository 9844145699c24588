export {
  type AnswerFacts,
  type AnswerMessage,
  type AnswerPaths,
  type AnswerTo,
  answerMessage,
  parseAnswerMessage,
  type Refusal,
  refusalMessage,
} from './answer.ts';
export * from './bundle.ts';
export { bundleDigest, decodeBundle, encodeBundle } from './bundle-document.ts';
export type { DrivenTensors, FeatureTensors } from './bundle-features.ts';
export type { SwitchedCorrectionTensors, SwitchedTensors } from './bundle-switched.ts';
export { decode, encode } from './codec.ts';
export { conversionOf, convert, wrapOf } from './conversion.ts';
export { counterIncrease } from './counter.ts';
export { sha256, toHex } from './digest.ts';
export { formatDuration, parseDuration } from './duration.ts';
export {
  ENVELOPE_MAGIC,
  ENVELOPE_VERSION,
  type Envelope,
  type EnvelopeSignature,
  MAX_SIGNATURES,
  readEnvelope,
  type SealNumbers,
} from './envelope.ts';
export * from './errors.ts';
export { type FleetEntry, type FleetEntryOptions, parseFleetFile } from './fleet-file.ts';
export * from './forecast.ts';
export * from './forecasts.ts';
export { deepFreeze } from './freeze.ts';
export * from './health.ts';
export { formatInstant, parseInstant } from './instant.ts';
export * from './keys.ts';
export * from './limits.ts';
export type { MessageHead, Quality } from './message.ts';
export { type DecodedSignal, MessageDecoder } from './message-decoder.ts';
export { isName, NAME_RULE, toName } from './name.ts';
export { nearestName } from './nearest.ts';
export { type PayloadReason, refusalText } from './payload/refusal.ts';
export {
  decodeLayout,
  decodePlainState,
  encodeLayout,
  encodePlainState,
  type Layout,
  type LayoutChannel,
  layoutDigest,
  layoutOf,
  type PlainState,
} from './plain-record.ts';
export * from './plan.ts';
export { isPointer, pointerTokens, resolvePointer } from './pointer.ts';
export { parseQuestion, type Question, type QuestionReason, type QuestionRules } from './question.ts';
export type { ReadingTarget } from './reading-target.ts';
export * from './receipt.ts';
export { bundleSchemaHash, describeSchemaDifference, schemaHash } from './schema-hash.ts';
export * from './seal.ts';
export * from './segment/index.ts';
export * from './site.ts';
export type { ExcludedSpan, ExcludedWhile, Exclusion } from './site-exclude.ts';
export { formatExclude, formatSite } from './site-format.ts';
export { defaultWarnRule, type SignalWarn, type WarnRule, type WarnWords, warnRuleOf } from './site-warn.ts';
export type { MemberState } from './sparkplug/member.ts';
export { metricNames } from './sparkplug/payload.ts';
export { parseSavedNodes } from './sparkplug/saved.ts';
export type { SavedNode, SourceState, SparkplugCounts, SparkplugSessions } from './sparkplug/sessions.ts';
export { parseSparkplugSource, parseSparkplugTopic, sparkplugFilters } from './sparkplug/topic.ts';
export * from './state.ts';
export * from './tensor.ts';
export * from './topics.ts';
export * from './version.ts';
export * from './warning.ts';
