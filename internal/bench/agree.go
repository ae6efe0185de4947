package main

import (
	"fmt"
	"math"

	"mirrorloom/fitsutil"
	"mirrorloom/pipeline/product"
)

// planes reads images of the same axes side by side, a plane at a time: whole
// cubes would count into the memory of the programs measured next.
type planes struct {
	files  []*fitsutil.File
	images []*fitsutil.Image
}

type imageOf struct{ path, name string }

func openPlanes(list ...imageOf) (p *planes, err error) {
	p = new(planes)
	defer func() {
		if err != nil {
			p.close()
		}
	}()
	for _, l := range list {
		f, err := fitsutil.Open(l.path)
		if err != nil {
			return nil, err
		}
		p.files = append(p.files, f)
		im, err := f.ImageNamed(l.name)
		if err != nil {
			return nil, err
		}
		p.images = append(p.images, im)
	}
	return p, nil
}

func (p *planes) close() {
	for _, f := range p.files {
		f.Close() // only read from
	}
}

// each visits every place of all images.
func (p *planes) each(visit func(at []float32)) error {
	first := p.images[0]
	n := first.Width() * first.Height()
	data, at := make([][]float32, len(p.images)), make([]float32, len(p.images))
	for i := range data {
		data[i] = make([]float32, n)
	}
	for l := range first.Planes() {
		for i, im := range p.images {
			if err := im.ReadPlaneRows(data[i], l, 0, im.Height()); err != nil {
				return err
			}
		}
		for k := range n {
			for i := range at {
				at[i] = data[i][k]
			}
			visit(at)
		}
	}
	return nil
}

// sameElements demands the same SIGNAL but for the rounding of float32 sums.
func sameElements(ours, theirs string) (string, error) {
	p, err := openPlanes(imageOf{ours, product.Signal}, imageOf{theirs, product.Signal})
	if err != nil {
		return "", err
	}
	defer p.close()
	farthest, brightest := 0.0, 0.0
	err = p.each(func(at []float32) {
		farthest = max(farthest, math.Abs(float64(at[0]-at[1])))
		brightest = max(brightest, math.Abs(float64(at[0])))
	})
	if err != nil {
		return "", err
	}
	const rounding = 5e-6
	if !(farthest < rounding*brightest) {
		return "", fmt.Errorf("the element cubes differ by up to %g of %g: they are not the same product", farthest, brightest)
	}
	return fmt.Sprintf("within %.1e of the brightest", farthest/brightest), nil
}

// sameCube demands that SIGNAL differs by less than so many of its own errors, rms, from
// a script's, whose interpolant at least is another one.
func sameCube(small float64, why string) func(ours, theirs string) (string, error) {
	return func(ours, theirs string) (string, error) {
		rms, n, err := differenceInSigma(ours, theirs)
		if err != nil {
			return "", err
		}
		if !(rms < small) {
			return "", fmt.Errorf("the cubes differ by %g of their errors (rms): they are not the same product", rms)
		}
		return fmt.Sprintf("rms difference %.2f sigma over %d voxels that both call good (%s)", rms, n, why), nil
	}
}

func differenceInSigma(ours, theirs string) (rms float64, n int, err error) {
	p, err := openPlanes(imageOf{ours, product.Signal}, imageOf{ours, product.Variance}, imageOf{ours, product.FlagsImage},
		imageOf{theirs, product.Signal}, imageOf{theirs, product.FlagsImage})
	if err != nil {
		return 0, 0, err
	}
	defer p.close()
	square := 0.0
	err = p.each(func(at []float32) {
		if int16(at[2])&product.FlagBad != 0 || int16(at[4])&product.FlagBad != 0 {
			return
		}
		d := float64(at[0]-at[3]) / math.Sqrt(float64(at[1]))
		square += d * d
		n++
	})
	return math.Sqrt(square / float64(n)), n, err
}
