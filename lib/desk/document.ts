import type { DeskDocument, DeskInstance } from "@/lib/contracts/desk";

/** What can be done to a drawing. Every command has an exact inverse. */
export type Command =
  | { type: "add"; instance: DeskInstance; index?: number }
  | { type: "remove"; id: string }
  | { type: "change"; id: string; to: Partial<Omit<DeskInstance, "id">> }
  | { type: "dismiss"; proposalId: string }
  | { type: "restore"; proposalId: string }
  | { type: "dismissAt"; proposalId: string; index: number }
  | { type: "all"; commands: Command[] };

export const EMPTY_DOCUMENT: DeskDocument = { instances: [], dismissedProposalIds: [] };

export type Applied = { document: DeskDocument; inverse: Command };

/**
 * The drawing after a command, and the command that takes it back exactly. Pure: the given document is not
 * touched. A command on an instance that is not there changes nothing. O(instances).
 */
export function apply(document: DeskDocument, command: Command): Applied {
  switch (command.type) {
    case "add": {
      const index = command.index ?? document.instances.length;
      if (document.instances.some((instance) => instance.id === command.instance.id))
        return unchanged(document);
      const instances = [
        ...document.instances.slice(0, index),
        command.instance,
        ...document.instances.slice(index),
      ];
      return { document: { ...document, instances }, inverse: { type: "remove", id: command.instance.id } };
    }
    case "remove": {
      const index = document.instances.findIndex((instance) => instance.id === command.id);
      const instance = document.instances[index];
      if (!instance) return unchanged(document);
      const instances = document.instances.filter((other) => other.id !== command.id);
      return { document: { ...document, instances }, inverse: { type: "add", instance, index } };
    }
    case "change": {
      const before = document.instances.find((instance) => instance.id === command.id);
      if (!before) return unchanged(document);
      const names = Object.keys(command.to) as (keyof DeskInstance)[]; // a literal of the command's own type
      if (names.every((name) => isSame(before[name], command.to[name as keyof typeof command.to])))
        return unchanged(document);
      const after = { ...before, ...command.to };
      const from = Object.fromEntries(names.map((name) => [name, before[name]]));
      const instances = document.instances.map((instance) => (instance.id === command.id ? after : instance));
      return { document: { ...document, instances }, inverse: { type: "change", id: command.id, to: from } };
    }
    case "dismiss":
      return apply(document, { ...command, type: "dismissAt", index: document.dismissedProposalIds.length });
    case "dismissAt": {
      const { proposalId, index } = command;
      if (document.dismissedProposalIds.includes(proposalId)) return unchanged(document);
      const dismissedProposalIds = document.dismissedProposalIds.toSpliced(index, 0, proposalId);
      return { document: { ...document, dismissedProposalIds }, inverse: { type: "restore", proposalId } };
    }
    case "restore": {
      const { proposalId } = command;
      const index = document.dismissedProposalIds.indexOf(proposalId);
      if (index < 0) return unchanged(document);
      const dismissedProposalIds = document.dismissedProposalIds.toSpliced(index, 1);
      return {
        document: { ...document, dismissedProposalIds },
        inverse: { type: "dismissAt", proposalId, index },
      };
    }
    case "all": {
      let current = document;
      const inverses: Command[] = [];
      for (const part of command.commands) {
        const step = apply(current, part);
        if (step.document !== current) inverses.unshift(step.inverse);
        current = step.document;
      }
      return { document: current, inverse: { type: "all", commands: inverses } };
    }
  }
}

/** Values of an instance are strings, booleans and plain shapes, so their text tells whether they are equal. */
function isSame(a: unknown, b: unknown): boolean {
  return a === b || (typeof a === "object" && JSON.stringify(a) === JSON.stringify(b));
}

function unchanged(document: DeskDocument): Applied {
  return { document, inverse: { type: "all", commands: [] } };
}
