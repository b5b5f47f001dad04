/**
 * Runs work on every job, at most so many at a time, and returns the results in the order of the jobs. No job is begun
 * after one has failed.
 */
export async function inTurns<Job, Done>(jobs: Job[], width: number, work: (job: Job, i: number) => Promise<Done>) {
  const done: Done[] = new Array(jobs.length);
  let next = 0;
  const lane = async () => {
    while (next < jobs.length) {
      const i = next++;
      done[i] = await work(jobs[i], i).catch((error) => {
        next = jobs.length;
        throw error;
      });
    }
  };
  await Promise.all(Array.from({ length: Math.min(width, jobs.length) }, lane));
  return done;
}
