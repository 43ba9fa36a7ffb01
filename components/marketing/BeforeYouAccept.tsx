import { Sheet } from "@/components/ui/Sheet";
import { Facts, type Fact } from "@/components/ui/Stat";

const FOR_ANNOTATORS: readonly Fact[] = [
  {
    term: "Pay",
    detail: "The base per image, the amount per agreed box and per agreed outline, and the cap per image.",
  },
  {
    term: "Per hour",
    detail:
      "The median that finished tasks really earned, and how many tasks that is. Until there are enough, it says so.",
  },
  {
    term: "The brief",
    detail: "All of it, with its example pictures, in the version you will be judged by.",
  },
  {
    term: "The key",
    detail: "Every class with number, colour and pattern, and whether it wants a box or an outline.",
  },
  { term: "How it is judged", detail: "How many people draw each image, and the agreement it must reach." },
  {
    term: "What you may see",
    detail: "Sensitive batches say so before the first image and are for those who opted in.",
  },
  {
    term: "If you disagree",
    detail: "Where to contest a score, and that the decision comes with its reason.",
  },
];

const FOR_REQUESTERS: readonly Fact[] = [
  {
    term: "Cost",
    detail:
      "Expected, worst case and platform fee, from the same function that later charges. The bill stays within it.",
  },
  {
    term: "Quality",
    detail: "The agreement target, and from how many to how many annotators an image may take.",
  },
  {
    term: "The floor",
    detail: "The hourly pay that the batch must not fall below, beside what tasks measure.",
  },
  {
    term: "Your images",
    detail: "Location and camera metadata stripped from every stored copy; a reason beside any file refused.",
  },
  {
    term: "The release",
    detail: "COCO, Pascal VOC and mask files, quality report, provenance and checksums.",
  },
  { term: "What is left", detail: "Unspent money goes back when the batch is closed." },
];

/** Two blank forms: what each side is shown before it commits to anything. */
export function BeforeYouAccept() {
  return (
    <div className="grid items-start gap-6 lg:grid-cols-2">
      <Sheet
        level={3}
        title="Before you claim a task"
        lead="Shown to every annotator, on the board, without asking."
      >
        <Facts facts={FOR_ANNOTATORS} />
      </Sheet>
      <Sheet
        level={3}
        title="Before you fund a batch"
        lead="Shown to every requester, before a card is charged."
      >
        <Facts facts={FOR_REQUESTERS} />
      </Sheet>
    </div>
  );
}
