"use client";

import { Menu } from "@base-ui/react/menu";
import { CircleUserRound, LogOut } from "lucide-react";
import Link from "next/link";
import { signOut } from "next-auth/react";
import type { ShellUser } from "./AppShell";

const ITEM =
  "flex min-h-11 w-full items-center gap-2.5 px-4 text-start outline-none data-highlighted:bg-paper cursor-pointer";

/** Who is signed in, and the way out. */
export function AccountMenu({ user }: { user: ShellUser }) {
  return (
    <Menu.Root>
      <Menu.Trigger
        aria-label={`Account of ${user.name}`}
        className="rounded-sheet hover:bg-ink/8 data-popup-open:bg-ink/8 flex min-h-11 items-center gap-2 px-2.5 font-semibold"
      >
        <CircleUserRound aria-hidden className="size-5" />
        <span className="hidden max-w-40 truncate xl:inline">{user.name}</span>
      </Menu.Trigger>
      <Menu.Portal>
        <Menu.Positioner sideOffset={6} align="end" className="z-50">
          <Menu.Popup className="bg-sheet border-rule rounded-sheet shadow-lift w-64 border py-1">
            <div className="border-line border-b px-4 py-2.5">
              <p className="font-semibold">{user.name}</p>
              <p className="text-muted truncate text-sm">{user.email}</p>
              <p className="text-muted text-sm">Signed in as {user.role}</p>
            </div>
            <Menu.Item className={ITEM} render={<Link href="/account" />}>
              <CircleUserRound aria-hidden className="size-4.5" />
              Account
            </Menu.Item>
            <Menu.Item className={ITEM} onClick={() => void signOut({ callbackUrl: "/" })}>
              <LogOut aria-hidden className="size-4.5" />
              Sign out
            </Menu.Item>
          </Menu.Popup>
        </Menu.Positioner>
      </Menu.Portal>
    </Menu.Root>
  );
}
