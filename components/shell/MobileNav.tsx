"use client";

import { Dialog } from "@base-ui/react/dialog";
import { Menu, X } from "lucide-react";
import { usePathname } from "next/navigation";
import { useState } from "react";
import { backdropLook } from "@/components/ui/Dialog";
import type { NavItem } from "./nav";
import { NavLinks } from "./NavLinks";

/** The places on a narrow screen, in a drawer from the right that closes on arrival. */
export function MobileNav({ items }: { items: readonly NavItem[] }) {
  const pathname = usePathname();
  // Open belongs to the page it was opened on: going back closes it too. A link to a part of the same page
  // changes no path, so a click in the list closes it as well.
  const [openOn, setOpenOn] = useState<string>();
  return (
    <Dialog.Root
      open={openOn === pathname}
      onOpenChange={(open: boolean) => setOpenOn(open ? pathname : undefined)}
    >
      <Dialog.Trigger
        aria-label="Menu"
        className="rounded-sheet hover:bg-ink/8 grid size-11 place-items-center lg:hidden"
      >
        <Menu aria-hidden className="size-6" />
      </Dialog.Trigger>
      <Dialog.Portal>
        <Dialog.Backdrop className={backdropLook} />
        <Dialog.Popup className="bg-sheet border-rule fixed inset-y-0 right-0 z-50 flex w-[min(20rem,86vw)] flex-col gap-6 overflow-y-auto border-s p-4">
          <div className="flex items-center justify-between">
            <Dialog.Title className="font-heading ps-4 text-lg font-semibold">Merestone</Dialog.Title>
            <Dialog.Close aria-label="Close menu" className="hover:bg-ink/8 grid size-11 place-items-center">
              <X aria-hidden className="size-6" />
            </Dialog.Close>
          </div>
          <nav aria-label="Main" onClick={() => setOpenOn(undefined)}>
            <NavLinks items={items} direction="column" />
          </nav>
        </Dialog.Popup>
      </Dialog.Portal>
    </Dialog.Root>
  );
}
