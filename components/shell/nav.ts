export type ShellRole = "requester" | "annotator" | "admin";

export type NavItem = { href: string; label: string; external?: boolean };

const PLACES: Record<ShellRole, readonly NavItem[]> = {
  requester: [
    { href: "/batches", label: "Batches" },
    { href: "/wallet", label: "Wallet" },
    { href: "/team", label: "Team" },
  ],
  annotator: [
    { href: "/board", label: "Board" },
    { href: "/work", label: "Work" },
    { href: "/earnings", label: "Earnings" },
  ],
  admin: [
    { href: "/docket", label: "Docket" },
    { href: "/people", label: "People" },
    { href: "/ledger", label: "Ledger" },
    { href: "/payouts", label: "Payouts" },
    { href: "/jobs", label: "Jobs" },
    { href: "/audit", label: "Audit" },
  ],
};

/** Where a role's work begins after signing in. */
export function homeOf(role: ShellRole): string {
  return { requester: "/batches", annotator: "/board", admin: "/docket" }[role];
}

/** The places of a role, in the order of its work; the mailbox of the local stand-in only where one runs. */
export function navFor(
  role: ShellRole,
  { mailboxHref }: { mailboxHref?: string | undefined } = {},
): NavItem[] {
  const mailbox = mailboxHref ? [{ href: mailboxHref, label: "Mailbox", external: true }] : [];
  return [...PLACES[role], ...mailbox];
}

/** Whether `href` is the place of `pathname`, or one above it. */
export function isPlaceOf(href: string, pathname: string): boolean {
  return pathname === href || pathname.startsWith(`${href}/`);
}
