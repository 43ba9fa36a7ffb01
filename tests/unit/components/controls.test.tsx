// @vitest-environment happy-dom
import { cleanup, fireEvent, render, screen, waitFor } from "@testing-library/react";
import { afterEach, describe, expect, it, vi } from "vitest";
import { Button } from "@/components/ui/Button";
import { ConfirmDialog } from "@/components/ui/ConfirmDialog";
import { Markdown } from "@/components/ui/Markdown";
import { MoneyInput } from "@/components/ui/MoneyInput";
import { Progress } from "@/components/ui/Progress";
import { ConsensusMark } from "@/components/ui/StateMark";
import { Steps } from "@/components/ui/Steps";
import { TextInput } from "@/components/ui/TextInput";
import { When } from "@/components/ui/When";

afterEach(cleanup);

describe("a text field", () => {
  it("ties its hint and its error to the control", () => {
    render(<TextInput label="E-mail" hint="We answer there." error={["Too short.", "No @."]} name="email" />);
    const input = screen.getByLabelText("E-mail");
    const described = (input.getAttribute("aria-describedby") ?? "").split(" ");
    const text = described.map((id) => document.getElementById(id)?.textContent).join(" | ");
    expect(text).toBe("We answer there. | Too short. No @.");
    expect(input.getAttribute("aria-invalid")).toBe("true");
  });

  it("claims no error when there is none", () => {
    render(<TextInput label="Name" error={[]} />);
    expect(screen.getByLabelText("Name").hasAttribute("aria-invalid")).toBe(false);
  });
});

describe("a money field", () => {
  it("carries whole cents into the form and shows the whole amount once left", () => {
    const changed = vi.fn();
    const { container } = render(<MoneyInput label="Pay" name="baseCents" onCentsChange={changed} />);
    const input = screen.getByLabelText("Pay");
    fireEvent.change(input, { target: { value: "4.35" } });
    expect(changed).toHaveBeenLastCalledWith(435);
    expect(container.querySelector<HTMLInputElement>("input[name=baseCents]")?.value).toBe("435");
    fireEvent.change(input, { target: { value: "7" } });
    fireEvent.blur(input);
    expect(screen.getByLabelText<HTMLInputElement>("Pay").value).toBe("7.00");
  });

  it("sends nothing and says why when the amount is outside its limits", () => {
    const changed = vi.fn();
    const { container } = render(
      <MoneyInput label="Pay" name="baseCents" minCents={500} maxCents={1000} onCentsChange={changed} />,
    );
    fireEvent.change(screen.getByLabelText("Pay"), { target: { value: "4.99" } });
    fireEvent.blur(screen.getByLabelText("Pay"));
    expect(changed).toHaveBeenLastCalledWith(undefined);
    expect(container.querySelector<HTMLInputElement>("input[name=baseCents]")?.value).toBe("");
    expect(screen.getByText("The least possible is $5.00.")).toBeTruthy();
  });
});

it("a pending button does nothing, keeps focus and cannot submit", () => {
  const pressed = vi.fn();
  render(
    <Button type="submit" pending onClick={pressed}>
      Fund
    </Button>,
  );
  const button = screen.getByRole<HTMLButtonElement>("button", { name: "Fund" });
  fireEvent.click(button);
  expect(pressed).not.toHaveBeenCalled();
  expect([button.type, button.disabled, button.getAttribute("aria-busy")]).toEqual(["button", false, "true"]);
});

describe("a confirmation", () => {
  const dialog = (onConfirm: () => Promise<string | void>) => (
    <ConfirmDialog
      title="Close this batch?"
      consequence="$41.20 goes back."
      confirmLabel="Close the batch"
      kind="danger"
      typed="Wrack line"
      trigger={<Button>Close</Button>}
      onConfirm={onConfirm}
    />
  );

  it("waits for the exact words before it can be given", async () => {
    const confirmed = vi.fn(async () => undefined);
    render(dialog(confirmed));
    fireEvent.click(screen.getByRole("button", { name: "Close" }));
    const confirm = await screen.findByRole<HTMLButtonElement>("button", { name: "Close the batch" });
    expect(confirm.disabled).toBe(true);
    fireEvent.change(screen.getByRole("textbox"), { target: { value: "wrack line" } });
    expect(confirm.disabled).toBe(true);
    fireEvent.change(screen.getByRole("textbox"), { target: { value: "Wrack line" } });
    fireEvent.click(confirm);
    await waitFor(() => expect(confirmed).toHaveBeenCalledTimes(1));
    await waitFor(() => expect(screen.queryByRole("alertdialog")).toBeNull());
  });

  it("stays open and says what went wrong when it is refused", async () => {
    render(dialog(async () => "The batch has an open dispute."));
    fireEvent.click(screen.getByRole("button", { name: "Close" }));
    fireEvent.change(await screen.findByRole("textbox"), { target: { value: "Wrack line" } });
    fireEvent.click(screen.getByRole("button", { name: "Close the batch" }));
    expect((await screen.findByRole("alert")).textContent).toContain("The batch has an open dispute.");
    expect(screen.getByRole("alertdialog")).toBeTruthy();
  });
});

describe("states are told in words", () => {
  it.each([
    ["settled", "Settled"],
    ["short", "Short"],
    ["split", "Split"],
  ] as const)("%s reads %s and has a sign", (state, word) => {
    const { container } = render(<ConsensusMark state={state} />);
    expect(container.textContent).toBe(word);
    expect(container.querySelector("svg")).toBeTruthy();
  });

  it("progress of unknown length has no value, and a known one never rounds up to done", () => {
    const { rerender } = render(<Progress label="Proposals" value={null} />);
    expect(screen.getByRole("progressbar").hasAttribute("aria-valuenow")).toBe(false);
    rerender(<Progress label="Proposals" value={0.999} />);
    expect(screen.getByRole("progressbar").getAttribute("aria-valuenow")).toBe("99");
  });

  it("the current step is marked for assistive technology", () => {
    render(
      <Steps
        label="New batch"
        steps={[
          { label: "Images", state: "done" },
          { label: "Key and brief", state: "current" },
          { label: "Review", state: "ahead" },
        ]}
      />,
    );
    const current = screen
      .getAllByRole("listitem")
      .filter((item) => item.getAttribute("aria-current") === "step");
    expect(current.map((item) => item.textContent)).toEqual(["Key and brief, you are here"]);
  });
});

it("Markdown of a person cannot bring script, style, frame or handler into the page", () => {
  const { container } = render(
    <Markdown>
      {
        '# Brief\n\n<script>x</script><iframe src="https://e.example"></iframe>\n\n[a](javascript:alert(1)) ![b](https://e.example/b.png)\n\n<p onclick="x" style="position:fixed">c</p>'
      }
    </Markdown>,
  );
  expect(container.querySelector("script, iframe, style, [onclick], [style]")).toBeNull();
  expect(container.querySelector("a")?.getAttribute("href") ?? "").not.toContain("javascript");
  expect(container.querySelector("h1")).toBeNull();
  expect(container.querySelector("h3")?.textContent).toBe("Brief");
});

it("a moment is machine-readable in UTC whatever zone it is shown in", () => {
  const { container } = render(<When at={Date.UTC(2026, 2, 29, 1, 30)} />);
  expect(container.querySelector("time")?.getAttribute("datetime")).toBe("2026-03-29T01:30:00.000Z");
});
