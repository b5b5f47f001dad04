package main

import (
	"context"
	"fmt"
	"net"
	"net/http"
	"time"

	"github.com/chromedp/chromedp"
)

// benchBrowser is the page in Chromium, driven through its engine and not through its panels.
type benchBrowser struct {
	ctx   context.Context
	stops []func()
}

// openBenchBrowser serves the page and opens it.
func openBenchBrowser(p http.Handler) (*benchBrowser, error) {
	listener, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		return nil, err
	}
	go http.Serve(listener, p)
	options := []chromedp.ExecAllocatorOption{chromedp.ExecPath("/usr/bin/chromium")}
	for _, flag := range []string{"headless", "no-sandbox", "disable-gpu", "disable-quic", "no-first-run", "disable-background-networking", "disable-component-update", "disable-sync", "disable-dev-shm-usage"} {
		options = append(options, chromedp.Flag(flag, true))
	}
	allocator, stop := chromedp.NewExecAllocator(context.Background(), options...)
	ctx, cancel := chromedp.NewContext(allocator)
	b := &benchBrowser{ctx: ctx, stops: []func(){cancel, stop, func() { listener.Close() }}}
	// The browser lives as long as the context of the first run: no time limit here.
	if err := chromedp.Do(ctx, chromedp.Navigate("http://"+listener.Addr().String()+"/")); err != nil {
		b.close()
		return nil, err
	}
	_, err = evaluate[string](b, benchScript)
	return b, err
}

func (b *benchBrowser) close() {
	for _, stop := range b.stops {
		stop()
	}
}

// benchScript puts what the benchmark asks for beside the page's engine.
const benchScript = `
(async () => {
  while (document.body.dataset.state !== "ready") await new Promise((resolve) => setTimeout(resolve, 50));
  const input = document.createElement("input");
  input.type = "file";
  input.id = "bench-file";
  input.hidden = true;
  document.body.append(input);
  globalThis.benchOpen = async () => {
    const file = input.files[0];
    const { body } = await torrloomEngine.request("open", { names: [file.name] }, [file]);
    globalThis.benchDelays = body.delays;
    return body.name;
  };
  globalThis.benchChain = async (recipe, workers, fits) => {
    const ask = (kind, body, buffers = [], options = {}) => torrloomEngine.request(kind, body, buffers, options);
    const plan = (await ask("plan", { recipe, workers })).body;
    let from = performance.now();
    const lap = () => { const s = (performance.now() - from) / 1000; from = performance.now(); return s; };
    const { constants } = (await ask("measure", { recipe: plan.recipe })).body;
    const seconds = { Measure: lap(), Image: 0, Fit: 0 };
    const voxels = plan.n[0] * plan.n[1] * plan.n[2];
    const images = [], noiseSD = [];
    await Promise.all(plan.reconstructJobs.map(async (frames) => {
      const { body, buffers } = await ask("reconstruct", { recipe: plan.recipe, constants, frames });
      frames.forEach((f, i) => { images[f] = new Float32Array(buffers[0], i * voxels * 4, voxels); noiseSD[f] = body.noiseSD[i]; });
    }));
    seconds.Image = lap();
    if (!fits) return seconds;
    await Promise.all(plan.fitJobs.map(async ([a, b]) => {
      const part = new Float32Array(images.length * (b - a));
      images.forEach((image, f) => part.set(image.subarray(a, b), f * (b - a)));
      await ask("fit", { recipe: plan.recipe, noiseSD, voxels: b - a }, [part], { transfer: true });
    }));
    seconds.Fit = lap();
    return seconds;
  };
  return "";
})()`

// open gives a file to the engine.
func (b *benchBrowser) open(path string) error {
	if err := b.do(chromedp.SetUploadFiles(chromedp.CSS("#bench-file"), []string{path})); err != nil {
		return err
	}
	_, err := evaluate[string](b, "benchOpen()")
	return err
}

// chain runs measure, reconstruct and fit with the jobs of so many workers.
func (b *benchBrowser) chain(recipe string, workers int) (chainSeconds, error) {
	return evaluate[chainSeconds](b, fmt.Sprintf("benchChain(%q, %d, true)", recipe, workers))
}

// images runs measure and reconstruct with one job.
func (b *benchBrowser) images(recipe string) (chainSeconds, error) {
	return evaluate[chainSeconds](b, fmt.Sprintf("benchChain(%q, 1, false)", recipe))
}

const benchPatience = 10 * time.Minute

func (b *benchBrowser) do(actions ...chromedp.Action[chromedp.Void]) error {
	ctx, cancel := context.WithTimeout(b.ctx, benchPatience)
	defer cancel()
	return chromedp.Do(ctx, actions...)
}

func evaluate[T any](b *benchBrowser, expression string) (T, error) {
	ctx, cancel := context.WithTimeout(b.ctx, benchPatience)
	defer cancel()
	return chromedp.Run(ctx, chromedp.Evaluate[T](expression, chromedp.EvalAwaitPromise))
}
