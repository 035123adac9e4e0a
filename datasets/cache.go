package datasets

import "sync"

// cache keeps what was loaded: files are the same for every replicate.
type cache struct {
	mu   sync.Mutex
	data *Data
}

func (c *cache) get(load func() (*Data, error)) (*Data, error) {
	c.mu.Lock()
	defer c.mu.Unlock()
	if c.data != nil {
		return c.data, nil
	}
	data, err := load()
	if err == nil {
		c.data = data
	}
	return data, err
}
