// Package store holds no Go; its tests hold what the page's memory promises, by running the TypeScript with node.
package store

import (
	"bytes"
	"encoding/json"
	"os"
	"os/exec"
	"testing"

	"github.com/evanw/esbuild/pkg/api"
)

// evaluate runs an async function body in TypeScript, after the import lines, and returns what it returns.
func evaluate(t *testing.T, imports, body string) string {
	t.Helper()
	folder, err := os.Getwd()
	if err != nil {
		t.Fatal(err)
	}
	source := imports + "\n;(async () => {" + body + "})().then((v) => console.log(JSON.stringify(v)))"
	built := api.Build(api.BuildOptions{
		Stdin:  &api.StdinOptions{Contents: source, ResolveDir: folder, Loader: api.LoaderTS},
		Bundle: true, Write: false, Platform: api.PlatformNode, Target: api.ES2022,
	})
	if len(built.Errors) > 0 {
		t.Fatalf("%s: %s", source, built.Errors[0].Text)
	}
	node := exec.Command("node", "-")
	node.Stdin = bytes.NewReader(built.OutputFiles[0].Contents)
	out, err := node.CombinedOutput()
	if err != nil || !json.Valid(out) {
		t.Fatalf("node: %v\n%s", err, out)
	}
	return string(bytes.TrimSpace(out))
}

func demand(t *testing.T, got, want string) {
	t.Helper()
	if got != want {
		t.Errorf("got %s, want %s", got, want)
	}
}

func TestLeastRecentlyUsedResultsGoFirstAndTheNewestStays(t *testing.T) {
	demand(t, evaluate(t, `import { Cache } from "./cache"`, `
		const cache = new Cache<string>(10);
		cache.put("a", "A", 4); cache.put("b", "B", 4); cache.get("a"); cache.put("c", "C", 4);
		const first = ["a", "b", "c"].map((key) => cache.get(key) ?? "gone");
		cache.put("d", "D", 99);
		return [...first, ...["a", "c", "d"].map((key) => cache.get(key) ?? "gone")]`),
		`["A","gone","C","gone","gone","D"]`)
}

func TestTurnsKeepTheOrderAndTheWidth(t *testing.T) {
	demand(t, evaluate(t, `import { inTurns } from "./turns"`, `
		let now = 0, most = 0;
		const done = await inTurns([30, 1, 20, 1, 1], 2, async (ms, i) => {
			most = Math.max(most, ++now);
			await new Promise((go) => setTimeout(go, ms));
			now--;
			return i * 10 });
		return [done, most]`),
		`[[0,10,20,30,40],2]`)
}

func TestNoTurnBeginsAfterAFailure(t *testing.T) {
	demand(t, evaluate(t, `import { inTurns } from "./turns"`, `
		const begun: number[] = [];
		const failure = await inTurns([0, 1, 2, 3], 2, async (job) => {
			begun.push(job);
			await new Promise((go) => setTimeout(go, 5 + job));
			if (job === 0) throw new Error("no") }).catch((error) => error.message);
		await new Promise((go) => setTimeout(go, 50));
		return [failure, begun]`),
		`["no",[0,1]]`)
}

func TestALeafChangesWithoutTouchingTheRest(t *testing.T) {
	demand(t, evaluate(t, `import { valueAt, withValue } from "./recipe"`, `
		const before = { mask: { amplitudeFraction: 0.2 }, rates: { minPerUS: 0 } } as any;
		const after = withValue(before, "mask.amplitudeFraction", 0.5) as any;
		return [valueAt(after, "mask.amplitudeFraction"), valueAt(before, "mask.amplitudeFraction"),
			after.rates === before.rates, valueAt(before, "calibration.zeroPerUS") ?? "absent"]`),
		`[0.5,0.2,true,"absent"]`)
}

func TestTypingIsOneStepOfUndo(t *testing.T) {
	demand(t, evaluate(t, `import { History } from "./history"`, `
		const history = new History<string>();
		history.note("matrix", "48"); history.note("matrix", "6"); history.note("mask", "64");
		const seen = [history.undo("64 masked"), history.undo("64"), history.undo("48") ?? "none"];
		return [...seen, history.redo("48"), history.redo("64"), history.canRedo.value]`),
		`["64","48","none","64","64 masked",false]`)
}

func TestAMissingCalibrationIsSaidInTheRecipeText(t *testing.T) {
	demand(t, evaluate(t, `import { textOf } from "./recipe"`, `
		return JSON.parse(textOf({ recipe: 1 } as any))`),
		`{"recipe":1,"calibration":null}`)
}

func TestListsAreReadAsTheyAreWritten(t *testing.T) {
	demand(t, evaluate(t, `import { listOf, textOfList } from "./list"`, `
		return ["3, 17, 40-44", "44 - 42;3 ", "5 4,4 3 9", "", "40 – 42"].map((text) => {
			const list = listOf(text);
			return list && textOfList(list) }).concat(["3.5", "-3", "a", "1-", "0-999999999", "1e3"].map(listOf) as any)`),
		`["3, 17, 40-44",null,"3-5, 9","","40-42",null,null,null,null,null,null]`)
}

// differing is a catalogue of each kind of setting with two recipes that differ in all of them.
const differing = `
	const row = (path, label, rest) => ({ path, label, unit: "", methods: [], choices: [], kind: "number", ...rest });
	const choices = [{ value: "a", label: "plain sum" }, { value: "b", label: "weighted sum" }];
	const settings = [
		row("reconstruction.method", "Method", { kind: "choice", choices }),
		row("reconstruction.cutoff", "Cutoff", { unit: "of k_max" }),
		row("reconstruction.fieldOfViewMM", "Field of view", { unit: "mm" }),
		row("reconstruction.tolerance", "Kernel tolerance", { methods: ["b"] }),
		row("conditioning.excludeShots", "Leave out shots", { kind: "list" }),
		row("calibration.zeroPerUS", "Rate at zero oxygen", { unit: "1/us" }),
	] as any;
	const first = { reconstruction: { method: "a", cutoff: 1, fieldOfViewMM: 30, tolerance: 0.1 }, conditioning: {} };
	const second = { reconstruction: { method: "b", cutoff: 0.8, fieldOfViewMM: 28, tolerance: 0.2 },
		conditioning: { excludeShots: [3, 7, 8, 9] }, calibration: { zeroPerUS: 0.1 } };`

func TestWhatSetsVariantsApartIsSaidInWords(t *testing.T) {
	demand(t, evaluate(t, `import { differences } from "./difference"`, differing+`
		return [differences(settings, second as any, first as any), differences(settings, first as any, second as any),
			differences(settings, first as any, { ...first, conditioning: { excludeShots: [] } } as any)]`),
		`[["converted to pO₂","method weighted sum instead of plain sum","cutoff 0.8 instead of 1",`+
			`"field of view 28 instead of 30 mm","kernel tolerance 0.2","leave out shots 3, 7-9 instead of none"],`+
			`["not converted to pO₂","method plain sum instead of weighted sum","cutoff 1 instead of 0.8",`+
			`"field of view 30 instead of 28 mm","leave out shots none instead of 3, 7-9"],[]]`)
}

// fakePlan gives the two functions of coarse.ts what they look at.
const fakePlan = `const plan = (matrix, method = "back-projection") =>
	({ recipe: { reconstruction: { method, matrix } }, frames: { timeUS: [1, 2] } }) as any;`

func TestACoarseImageIsMadeOnlyWhereItIsWorthItsTime(t *testing.T) {
	demand(t, evaluate(t, `import { coarseOf, isWorthwhile, noteSeconds } from "./coarse"`, fakePlan+`
		const unknown = [isWorthwhile(plan(64)), isWorthwhile(plan(16))];
		noteSeconds(plan(64), 0.29); noteSeconds(plan(96), 4); noteSeconds(plan(48, "gridding"), 0.9);
		noteSeconds(plan(32), 4); noteSeconds(plan(16, "gridding"), 1.1);
		return [unknown, [64, 96, 32].map((n) => isWorthwhile(plan(n))), coarseOf(plan(33, "single-point").recipe)]`),
		`[[true,false],[false,true,false],{"reconstruction":{"method":"single-point","matrix":17}}]`)
}
