console.log('runner')
setInterval(() => {}, 1000)
