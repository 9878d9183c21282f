import type { Chart, ChartConfiguration } from 'chart.js'

/** Draws a line chart; the library is fetched when the first plot comes into the page. */
export function useChart(canvas: Ref<HTMLCanvasElement | undefined>, configuration: () => ChartConfiguration<'line' | 'scatter'> | null) {
  let chart: Chart<'line' | 'scatter'> | undefined
  let gone = false

  async function draw() {
    const wanted = configuration()
    if (!canvas.value || !wanted) return
    if (chart) {
      chart.data = wanted.data
      chart.options = wanted.options ?? {}
      chart.update('none')
      return
    }
    const { Chart: Library, LineController, LineElement, LinearScale, PointElement, ScatterController } = await import('chart.js')
    if (gone || chart || !canvas.value) return
    Library.register(LineController, LineElement, LinearScale, PointElement, ScatterController)
    chart = new Library(canvas.value, wanted)
  }
  onMounted(() => watch(configuration, () => void draw(), { immediate: true, flush: 'post' }))
  onBeforeUnmount(() => {
    gone = true
    chart?.destroy()
  })
}
