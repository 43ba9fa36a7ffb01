import { afterAll, beforeAll, expect, it, vi } from "vitest";
import { sendMailJob } from "@/lib/jobs/handlers/sendMail";
import { RESEND_KEY, startTestFakes, type TestFakes } from "@/tests/support/fakes";

let fakes: TestFakes;
beforeAll(async () => {
  fakes = await startTestFakes();
  vi.stubEnv("RESEND_BASE_URL", fakes.resend.url);
  vi.stubEnv("RESEND_API_KEY", RESEND_KEY);
});
afterAll(() => fakes.remove());

const letter = {
  to: "tomas.brandt@skerrow.example",
  subject: "Your payout arrived",
  html: "<p>$8.96</p>",
  text: "$8.96",
  tag: "payout",
};
const send = (jobId: string) => sendMailJob(letter, { jobId, nowMs: Date.now, progress: () => undefined });

it("sends a letter once over all attempts of its job, and two letters of the same words twice", async () => {
  await send("job_one");
  await send("job_one");
  await send("job_two");
  const answer = await fetch(`${fakes.resend.url}/api/mails?to=${encodeURIComponent(letter.to)}`);
  expect(((await answer.json()) as { mails: unknown[] }).mails).toHaveLength(2);
});
