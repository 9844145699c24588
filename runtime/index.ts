/** The gateway, for those who run it inside a program of their own. The arithmetic alone is under ./filter. */
export { type Clock, systemClock } from './clock.ts';
export { type BrokerConfig, type ClockKind, defaultSegmentTicks, type GatewayConfig } from './config.ts';
export { type Disk, nodeDisk } from './disk.ts';
export { RuntimeError, type RuntimeErrorCode } from './errors.ts';
export { Gateway } from './gateway.ts';
export type { Log } from './log.ts';
export type { GatewayPorts } from './ports.ts';
export { type Outlook, outlooksOf } from './publish/outlooks.ts';
export { readingOf, trustOf } from './publish/warnings.ts';
export { SignalWarnings, type Trust } from './publish/warnings-signal.ts';
export { Serving } from './serving.ts';
export { SignalWatch } from './signals/watch.ts';
