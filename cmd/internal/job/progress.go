package job

import (
	"fmt"
	"sync"
	"time"

	"github.com/vbauerster/mpb/v8"
	"github.com/vbauerster/mpb/v8/decor"
)

// progress shows how far a long job is: a bar on a terminal after half a
// second, nothing elsewhere but a line every ten seconds.
type progress struct {
	env   *Env
	name  string
	start time.Time
	mu    sync.Mutex
	last  time.Time
	bars  *mpb.Progress
	bar   *mpb.Bar
}

func newProgress(env *Env, name string) *progress {
	now := time.Now()
	return &progress{env: env, name: name, start: now, last: now}
}

// At tells that done of total bytes are through.
func (p *progress) At(done, total int64) {
	if p.env.Quiet || total <= 0 {
		return
	}
	p.mu.Lock()
	defer p.mu.Unlock()
	switch {
	case !p.env.Progress:
		if time.Since(p.last) > 10*time.Second {
			p.last = time.Now()
			fmt.Fprintf(p.env.Err, "%s: %d %%\n", p.name, 100*done/total)
		}
	case p.bar == nil:
		if time.Since(p.start) < 500*time.Millisecond {
			return
		}
		p.bars = mpb.New(mpb.WithOutput(p.env.Err), mpb.WithWidth(40))
		p.bar = p.bars.AddBar(total, mpb.BarRemoveOnComplete(), mpb.PrependDecorators(decor.Name(p.name+" ")), mpb.AppendDecorators(decor.Percentage()))
		fallthrough
	default:
		p.bar.SetCurrent(done)
	}
}

// Done takes the bar away.
func (p *progress) Done() {
	p.mu.Lock()
	defer p.mu.Unlock()
	if p.bar != nil {
		p.bar.Abort(true)
		p.bars.Wait()
		p.bar = nil
	}
}
