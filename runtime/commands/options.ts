/** Options that several commands share, worded once. */
import type { Command } from 'commander';

/** Repeats of an option, gathered. */
export function gather(value: string, before: readonly string[]): readonly string[] {
  return [...before, value];
}

/** Where the broker is and how to be let in. */
export function brokerOptions(command: Command): Command {
  return command
    .requiredOption('--broker <url>', 'MQTT broker, mqtt://host:1883 or mqtts://host:8883')
    .option('--protocol <version>', 'auto (MQTT 5, else 3.1.1), 5 or 3.1.1', 'auto')
    .option('--username <name>', 'user name at the broker')
    .option('--password-file <file>', 'file with the password at the broker')
    .option('--authority <file>', 'PEM certificate authority of the broker')
    .option('--certificate <file>', 'PEM certificate of this client')
    .option('--key <file>', 'PEM key of this client');
}

/** Which sites, and whose bundles are believed. */
export function sitesOptions(command: Command): Command {
  return command
    .option('--site <file>', 'site file; may be repeated, for several sites in one process', gather, [])
    .option('--trust <file>', 'public author key whose bundles are believed; may be repeated', gather, []);
}
