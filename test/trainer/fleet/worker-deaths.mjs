/** A worker that dies where its task's folder says so: of memory, or by leaving. */
export default async function run({ index, job }) {
  if (job.out.endsWith('leaves')) process.exit(7);
  if (job.out.endsWith('hungry')) {
    const held = [];
    for (;;) held.push(new Array(1e6).fill(index));
  }
  return { kind: 'failed', problem: `lived: ${job.out}` };
}
