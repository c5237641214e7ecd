/** Waits for the work, but not longer; how it ends is of no matter. */
export async function within(ms: number, work: Promise<unknown>): Promise<void> {
  let timer: NodeJS.Timeout | undefined;
  const over = new Promise<void>((resolve) => {
    timer = setTimeout(resolve, ms);
  });
  await Promise.race([work.catch(() => undefined), over]);
  clearTimeout(timer);
}
