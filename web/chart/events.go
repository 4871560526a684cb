package chart

// Event is something done to the process, as the small charts show it: an arrow filled
// or hollow, or a post, without words.
type Event struct {
	Kind     ChangeKind
	Prompted bool
}

// eventStep is the px between events that stand between the same two points.
const eventStep = 9.0

// events draws events side by side about x, standing on base, so tall.
func (d *builder) events(list []Event, x, base, tall float64) {
	x -= float64(len(list)-1) * eventStep / 2
	for _, e := range list {
		switch e.Kind {
		case Post:
			d.line("post", x, base-tall, x, base)
			d.rect("post-head", x-4.5, base-tall, 4.5, tall*0.4)
		case Restart:
			d.line("restart", x-1.5, base-tall, x-1.5, base)
			d.line("restart", x+1.5, base-tall, x+1.5, base)
		default:
			d.stub(arrowClass(&Change{Prompted: e.Prompted}), x, base, tall, e.Kind == Up)
		}
		x += eventStep
	}
}

// stub is a small block arrow.
func (d *builder) stub(class string, x, base, tall float64, up bool) {
	head, tail, s := base-tall, base, tall/2
	if !up {
		head, tail, s = tail, head, -s
	}
	d.polygon(class, xy{x, head}, xy{x + 4.6, head + s}, xy{x + 1.7, head + s}, xy{x + 1.7, tail},
		xy{x - 1.7, tail}, xy{x - 1.7, head + s}, xy{x - 4.6, head + s})
}
