"use client";

import { useRouter } from "next/navigation";
import { useState, useTransition, type FormEvent } from "react";
import { toast } from "sonner";
import { Button } from "@/components/ui/Button";
import { MoneyInput } from "@/components/ui/MoneyInput";
import { Notice } from "@/components/ui/Notice";
import { RadioCards } from "@/components/ui/RadioCards";
import { Select } from "@/components/ui/Select";
import type { PayoutScheduleInput } from "@/lib/contracts/payments";
import type { ActionResult } from "@/lib/http/action";
import { saveSchedule } from "../actions";

const WEEKDAYS = ["Monday", "Tuesday", "Wednesday", "Thursday", "Friday", "Saturday", "Sunday"];

/** When money goes to the bank without being asked for: never, weekly or monthly, from an amount on. */
export function ScheduleForm({ rhythm, weekday, leastCents }: PayoutScheduleInput) {
  const router = useRouter();
  const [chosen, setChosen] = useState<string>(rhythm);
  const [failed, setFailed] = useState<Extract<ActionResult<unknown>, { ok: false }> | null>(null);
  const [pending, startTransition] = useTransition();

  // Not a form action: React resets the fields after one, and the choice would jump back on the screen.
  function submit(event: FormEvent<HTMLFormElement>): void {
    event.preventDefault();
    const form = new FormData(event.currentTarget);
    startTransition(async () => {
      const answer = await saveSchedule(null, form);
      setFailed(answer.ok ? null : answer);
      if (!answer.ok) return;
      toast.success("Kept.");
      router.refresh();
    });
  }

  return (
    <form onSubmit={submit} className="grid gap-5">
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
      <Button type="submit" kind="primary" pending={pending} className="justify-self-start">
        Keep this
      </Button>
    </form>
  );
}
