import Link from "next/link";
import type { ReactNode } from "react";
import { ButtonLink } from "@/components/ui/Button";
import { AccountMenu } from "./AccountMenu";
import { Footer } from "./Footer";
import { Wordmark } from "./MerestoneMark";
import { MobileNav } from "./MobileNav";
import { homeOf, navFor, type NavItem, type ShellRole } from "./nav";
import { NavLinks } from "./NavLinks";
import { ThemeToggle } from "./ThemeToggle";

export type ShellUser = { name: string; role: ShellRole; email: string };

type Props = {
  user: ShellUser | null;
  /** Places in the header; those of the user's role if absent. */
  nav?: readonly NavItem[];
  /** `full` gives the page the whole width, for the desk and the landing page. */
  width?: "page" | "full";
  /** The desk needs every pixel and brings its own cautions. */
  footer?: boolean;
  children: ReactNode;
};

const VISITOR_NAV: readonly NavItem[] = [
  { href: "/#how", label: "How a batch goes" },
  { href: "/#before", label: "Before you accept" },
];

// A narrow header has no room for these two as buttons, so the drawer lists them as well.
const VISITOR_DOORS: readonly NavItem[] = [
  { href: "/sign-in", label: "Sign in" },
  { href: "/join", label: "Join" },
];

/** Header, places, page and footer around every screen. */
export function AppShell({ user, nav, width = "page", footer = true, children }: Props) {
  const items = nav ?? (user ? navFor(user.role) : VISITOR_NAV);
  return (
    <div className="flex min-h-dvh flex-col">
      <a
        href="#content"
        className="bg-ink text-paper sr-only z-50 px-4 py-3 font-semibold focus:not-sr-only focus:absolute focus:top-2 focus:left-2"
      >
        Skip to content
      </a>
      <header className="bg-paper border-line sticky top-0 z-30 border-b print:hidden">
        <div className="max-w-page mx-auto flex h-16 items-center gap-3 px-4 sm:px-6 lg:px-8">
          <Link
            href={user ? homeOf(user.role) : "/"}
            aria-label="Merestone, start"
            className="shrink-0 min-[24rem]:me-4"
          >
            <Wordmark />
          </Link>
          <nav aria-label="Main" className="hidden lg:block">
            <NavLinks items={items} direction="row" />
          </nav>
          <div className="ms-auto flex items-center gap-1">
            <ThemeToggle />
            {user ? (
              <AccountMenu user={user} />
            ) : (
              <>
                <ButtonLink href="/sign-in" kind="plain" size="small" className="max-[24rem]:hidden">
                  Sign in
                </ButtonLink>
                <ButtonLink href="/join" kind="primary" size="small" className="hidden sm:inline-flex">
                  Join
                </ButtonLink>
              </>
            )}
            <MobileNav items={user ? items : [...items, ...VISITOR_DOORS]} />
          </div>
        </div>
      </header>
      <main
        id="content"
        tabIndex={-1}
        className={
          width === "page"
            ? "max-w-page mx-auto w-full px-4 py-8 outline-none sm:px-6 sm:py-10 lg:px-8"
            : "flex grow flex-col outline-none"
        }
      >
        {children}
      </main>
      {footer ? <Footer /> : null}
    </div>
  );
}
