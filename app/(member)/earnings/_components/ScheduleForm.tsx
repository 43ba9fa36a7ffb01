"use client";

import { useRouter } from "next/navigation";
import { useActionState, useState } from "react";
import { toast } from "sonner";
import { MoneyInput } from "@/components/ui/MoneyInput";
import { Notice } from "@/components/ui/Notice";
import { RadioCards } from "@/components/ui/RadioCards";
import { Select } from "@/components/ui/Select";
import { SubmitButton } from "@/components/ui/SubmitButton";
import type { PayoutScheduleInput } from "@/lib/contracts/payments";
import type { ActionResult } from "@/lib/http/action";
import { saveSchedule } from "../actions";

const WEEKDAYS = ["Monday", "Tuesday", "Wednesday", "Thursday", "Friday", "Saturday", "Sunday"];

/** When money goes to the bank without being asked for: never, weekly or monthly, from an amount on. */
export function ScheduleForm({ rhythm, weekday, leastCents }: PayoutScheduleInput) {
  const router = useRouter();
  const [chosen, setChosen] = useState<string>(rhythm);
  const [answer, submit] = useActionState(async (previous: ActionResult<unknown> | null, form: FormData) => {
    const result = await saveSchedule(null, form);
    if (result.ok) {
      toast.success("Kept.");
      router.refresh();
    }
    return result ?? previous;
  }, null);
  const failed = answer && !answer.ok ? answer : null;
  return (
    <form action={submit} className="grid gap-5">
      {failed ? (
        <Notice kind="danger" live>
          {failed.message}
        </Notice>
      ) : null}
      <RadioCards
        label="Pay me out"
        name="rhythm"
        columns={3}
        value={chosen}
        onValueChange={setChosen}
        options={[
          { value: "never", title: "when I ask", text: "Nothing moves by itself." },
          { value: "weekly", title: "every week", text: "On the day you choose." },
          { value: "monthly", title: "every month", text: "On the first, at 06:00 UTC." },
        ]}
      />
      {chosen === "never" ? (
        <>
          <input type="hidden" name="weekday" value={weekday} />
          <input type="hidden" name="leastCents" value={leastCents} />
        </>
      ) : (
        <div className="grid gap-4 sm:grid-cols-2">
          {chosen === "weekly" ? (
            <Select
              label="Day of the week"
              name="weekday"
              hint="It begins at 06:00 UTC."
              defaultValue={String(weekday)}
              options={WEEKDAYS.map((label, index) => ({ value: String(index + 1), label }))}
            />
          ) : (
            <input type="hidden" name="weekday" value={weekday} />
          )}
          <MoneyInput
            label="From this amount on"
            name="leastCents"
            defaultCents={leastCents}
            minCents={100}
            maxCents={1_000_000}
            hint="Less than this waits for the next time. At least $1.00."
            error={failed?.fields.leastCents}
          />
        </div>
      )}
      {chosen === "never" ? null : (
        <p className="text-muted text-sm">
          A letter tells you when it has left, when it has arrived, and if it comes back.
        </p>
      )}
      <SubmitButton className="justify-self-start">Keep this</SubmitButton>
    </form>
  );
}
